"""Errors: problem details (RFC 9457) whatever goes wrong, and nothing of the inside."""

from __future__ import annotations

import json

import pytest
from flask import Flask
from stagesum_server import app as application
from stagesum_server.limits import Limits
from stagesum_server.settings import Settings, SettingsError
from stagesum_server.web import problems
from werkzeug.exceptions import ServiceUnavailable, TooManyRequests

JSON = "application/json"


def problem(response, status):
    assert (response.status_code, response.content_type) == (status, "application/problem+json")
    body = json.loads(response.get_data())
    assert body["status"] == status
    assert body["type"]
    assert body["title"]
    assert body["detail"]
    return body


def test_health(client):
    response = client.get("/healthz")
    assert (response.status_code, response.get_data()) == (200, b'{"status":"ok"}')


def test_an_unknown_path_is_404(client):
    problem(client.get("/v1/bugdet"), 404)


def test_a_wrong_method_is_405_and_names_the_right_ones(client):
    response = client.get("/v1/budget")
    assert "POST" in problem(response, 405)["detail"]
    assert "POST" in response.headers["Allow"]


@pytest.mark.parametrize("accept", ["text/html", "application/json;q=0", "image/png, text/plain"])
def test_a_caller_that_takes_no_json_gets_406(client, accept):
    problem(client.post("/v1/budget", json={}, headers={"Accept": accept}), 406)


@pytest.mark.parametrize("accept", ["*/*", "application/*", "text/html, application/json;q=0.1", ""])
def test_a_caller_that_takes_json_gets_it(client, accept):
    assert client.get("/openapi.json", headers={"Accept": accept}).status_code == 200


@pytest.mark.parametrize(
    "kind", ["", "text/plain", "application/x-www-form-urlencoded", "application/ld+json", f"{JSON}; charset=latin-1"]
)
def test_another_media_type_is_415(client, kind):
    assert JSON in problem(client.post("/v1/budget", data=b"{}", content_type=kind), 415)["detail"] or "charset" in kind


def test_a_compressed_body_is_415(client):
    response = client.post("/v1/budget", data=b"x", content_type=JSON, headers={"Content-Encoding": "gzip"})
    problem(response, 415)


@pytest.mark.parametrize("kind", [f"{JSON}; charset=utf-8", f"{JSON};charset=UTF-8", "Application/JSON"])
def test_utf_8_may_be_named(client, kind):
    problem(client.post("/v1/budget", data=b"{}", content_type=kind), 422)


def test_a_body_too_large_is_413_and_names_the_limit():
    small = application.create_app(Settings(max_body_bytes=100)).test_client()
    response = small.post("/v1/budget", data=b" " * 101, content_type=JSON)
    assert "100 bytes" in problem(response, 413)["detail"]


@pytest.mark.parametrize("error", [TooManyRequests(retry_after=7), ServiceUnavailable(retry_after=7)])
def test_retry_after_survives(error):
    app = Flask("probe")
    problems.register(app)

    @app.get("/")
    def busy() -> str:
        raise error

    response = app.test_client().get("/")
    problem(response, error.code)
    assert response.headers["Retry-After"] == "7"


def test_a_defect_tells_nothing_of_the_inside():
    app = Flask("probe")
    problems.register(app)
    app.logger.disabled = True

    @app.get("/")
    def broken() -> str:
        raise KeyError("secret of the inside")

    assert "secret" not in json.dumps(problem(app.test_client().get("/"), 500))


@pytest.mark.parametrize(
    ("limits", "pointer", "words"),
    [
        (Limits(max_trials=1000), "#/monte_carlo", "trials; at most 1000"),
        (Limits(max_sources=3), "#/stages", "sources; at most 3"),
        (Limits(max_stages=2), "#/stages", "found 3 stages; at most 2"),
        (Limits(max_points=17), "#/conditions", "18 operating points"),
    ],
)
def test_the_service_refuses_more_than_its_limits(example, limits, pointer, words):
    tight = application.create_app(Settings(limits=limits)).test_client()
    faults = problem(tight.post("/v1/budget", json=example), 422)["errors"]
    assert any(fault["pointer"] == pointer and words in fault["detail"] for fault in faults), faults


def test_settings_come_from_the_environment():
    given = {"STAGESUM_MAX_BODY_BYTES": "1000", "STAGESUM_THREADS": "3", "STAGESUM_MAX_POINTS": " 7 ", "OTHER": "x"}
    assert Settings.from_environment(given) == Settings(1000, Limits(max_points=7), 3)
    assert Settings.from_environment({}) == Settings()


@pytest.mark.parametrize("value", ["0", "-1", "many", "1.5", "٣", "9" * 30])
def test_a_wrong_setting_is_named(value):
    with pytest.raises(SettingsError, match=r"STAGESUM_THREADS is .* above zero"):
        Settings.from_environment({"STAGESUM_THREADS": value})
