"""Settings for a deployment: those of the service; change what differs below.

Start with ``gunicorn -c deploy/gunicorn.conf.py "stagesum_server.app:create_app()"``.
"""

from stagesum_server.gunicorn_settings import *  # noqa: F403 - gunicorn reads every name

bind = "127.0.0.1:8000"
accesslog = "-"
