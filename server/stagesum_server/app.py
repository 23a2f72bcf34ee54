"""The application: settings in, a Flask app out."""

from __future__ import annotations

from flask import Flask

from stagesum_server.settings import Settings
from stagesum_server.web import budget, contract, health, problems


def create_app(settings: Settings | None = None) -> Flask:
    """Make the WSGI application; without ``settings`` they come from the environment.

    Raises
    ------
    SettingsError
        Where an environment variable has a wrong value.

    """
    settings = settings or Settings.from_environment()
    app = Flask("stagesum_server", static_folder=None)
    app.config["MAX_CONTENT_LENGTH"] = settings.max_body_bytes
    problems.register(app)
    app.register_blueprint(budget.blueprint(settings))
    app.register_blueprint(contract.blueprint)
    app.register_blueprint(health.blueprint)
    return app
