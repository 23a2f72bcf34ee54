"""The service inside this process: the same client, no port."""

from __future__ import annotations

import builtins
import json
import os
import re
import signal
import socket
import subprocess
import sys
import time
from pathlib import Path

import pytest
import stagesum
from stagesum import Client, embedded
from stagesum.command.serve import command_line
from stagesum_schemas.records import Budget

ROOT = Path(__file__).parents[1]
EXAMPLE = ROOT / "client/stagesum/examples/irrigation_transmitter.json"


@pytest.fixture(autouse=True)
def _no_service_elsewhere(monkeypatch):
    monkeypatch.delenv("STAGESUM_URL", raising=False)


@pytest.fixture
def fresh():
    """An application that isn't made yet, for what happens at its start."""
    embedded._application.cache_clear()
    yield
    embedded._application.cache_clear()


@pytest.fixture
def quick(example):
    return example | {"methods": ["worst_case"], "limit": {"max": "0.012 bar", "by": ["worst_case"]}}


def test_without_a_url_the_service_runs_in_this_process_and_opens_no_socket(quick, monkeypatch):
    def refuse(*_words):
        raise AssertionError("a socket was opened")

    monkeypatch.setattr(socket.socket, "connect", refuse)
    monkeypatch.setattr(socket.socket, "bind", refuse)
    with Client() as client:
        assert client.url == "embedded://stagesum"
        assert client.healthy()
        assert client.budget(quick).verdict.overall == "pass"


def test_the_client_returns_the_very_record_that_the_service_wrote(quick, client):
    answer = client.post("/v1/budget", data=json.dumps(quick), content_type="application/json")
    with Client() as embedded_client:
        assert embedded_client.budget(quick) == Budget.from_dict(answer.get_json())


def test_a_record_survives_its_json_form():
    with Client() as client:
        budget = client.budget(EXAMPLE)
    assert Budget.from_dict(budget.to_dict()) == budget
    assert budget.monte_carlo is not None


def test_a_wrong_chain_is_refused_with_its_faults(quick):
    quick["stages"][0]["gain"] = "2 mV/baa"
    with Client() as client, pytest.raises(stagesum.InvalidChain) as caught:
        client.budget(quick)
    assert caught.value.status == 422
    assert [fault.pointer for fault in caught.value.faults] == ["#/stages/0/gain"]


def test_text_that_is_no_json_is_refused_with_its_place():
    with Client() as client, pytest.raises(stagesum.InvalidChain, match="line 2, column"):
        client.budget(b'{"input":\n oops}')


def test_names_outside_ascii_go_there_and_back(quick):
    quick["title"] = "Wasserdruck µ Ω 水"
    with Client() as client:
        assert client.budget(quick).title == "Wasserdruck µ Ω 水"


@pytest.mark.usefixtures("fresh")
def test_a_missing_library_of_the_service_is_named_with_both_ways_on(monkeypatch):
    real = builtins.__import__

    def without_flask(name, *words, **options):
        if name.startswith("stagesum_server"):
            raise ModuleNotFoundError("No module named 'flask'", name="flask")
        return real(name, *words, **options)

    monkeypatch.setattr(builtins, "__import__", without_flask)
    expected = 'needs flask, which is not installed; either pip install "stagesum[server]", or give the URL'
    with pytest.raises(stagesum.MissingExtra, match=re.escape(expected)):
        Client()


@pytest.mark.usefixtures("fresh")
def test_a_wrong_setting_of_the_service_is_told(monkeypatch):
    monkeypatch.setenv("STAGESUM_MAX_BODY_BYTES", "many")
    with pytest.raises(stagesum.ServiceUnavailable, match="STAGESUM_MAX_BODY_BYTES is 'many'"):
        Client()


def test_a_session_of_the_caller_can_reach_the_embedded_service_too(quick):
    import requests

    with requests.Session() as session, Client(session=session) as client:
        assert client.budget(quick).unit == "bar"


def test_serve_puts_the_service_on_a_port(quick):
    """The real gunicorn, started as the command starts it."""
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    words = command_line("127.0.0.1", port, 1, 2)
    path = os.pathsep.join(str(ROOT / folder) for folder in ("client", "server", "schemas"))
    process = subprocess.Popen(words, env=os.environ | {"PYTHONPATH": path}, stderr=subprocess.PIPE)
    try:
        with Client(f"http://127.0.0.1:{port}", retries=0) as client:
            deadline = time.monotonic() + 20
            while not client.healthy():
                assert time.monotonic() < deadline, "the service did not start"
                time.sleep(0.05)
            assert client.budget(quick).verdict.overall == "pass"
    finally:
        process.send_signal(signal.SIGTERM)
        _, said = process.communicate(timeout=20)
    assert process.returncode == 0, said.decode()


def test_the_command_line_of_serve_sets_brackets_around_a_long_address():
    words = command_line("::1", 8000, None, None)
    assert words[:3] == [sys.executable, "-m", "gunicorn"]
    assert words[words.index("--bind") + 1] == "[::1]:8000"
    assert "--workers" not in words


def test_the_settings_of_a_deployment_are_taken_by_gunicorn():
    words = ["-m", "gunicorn", "--print-config", "-c", "deploy/gunicorn.conf.py", "stagesum_server.app:create_app()"]
    path = os.pathsep.join(str(ROOT / folder) for folder in ("client", "server", "schemas"))
    done = subprocess.run(
        [sys.executable, *words], cwd=ROOT, env=os.environ | {"PYTHONPATH": path}, capture_output=True, text=True
    )
    assert done.returncode == 0, done.stderr
    pairs = (line.partition("=") for line in done.stdout.splitlines())
    taken = {name.strip(): value.strip() for name, _, value in pairs}
    assert (taken["worker_class"], taken["preload_app"]) == ("gthread", "True")
    assert taken.get("control_socket_disable", "True") == "True"  # older versions have no control socket
