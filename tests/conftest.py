"""Fixtures shared by all tests: the service inside this process, spoken to over HTTP."""

from __future__ import annotations

import json
import os
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest
from hypothesis import settings
from stagesum_server.app import create_app
from stagesum_server.settings import Settings

if TYPE_CHECKING:
    from collections.abc import Callable

    from flask.testing import FlaskClient

ROOT = Path(__file__).parents[1]

# a change is judged by the same examples each time; a developer's runs look for new ones
settings.register_profile("ci", derandomize=True)
if os.environ.get("CI"):
    settings.load_profile("ci")


@pytest.fixture(scope="session")
def client() -> FlaskClient:
    """A client of the service, with every default."""
    return create_app(Settings()).test_client()


@pytest.fixture(scope="session")
def post(client: FlaskClient) -> Callable[[str, dict[str, Any]], dict[str, Any]]:
    """Post JSON, expect success, give the parsed answer."""

    def send(path: str, body: dict[str, Any]) -> dict[str, Any]:
        # written here, because the test client's own writer sorts members, and points follow the order of conditions
        response = client.post(path, data=json.dumps(body), content_type="application/json")
        assert response.status_code == 200, response.get_data(as_text=True)
        return json.loads(response.get_data())

    return send


@pytest.fixture
def example() -> dict[str, Any]:
    """A fresh copy of the example chain."""
    return json.loads((ROOT / "client/stagesum/examples/irrigation_transmitter.json").read_text())
