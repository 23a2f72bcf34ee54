"""The service inside the caller's process, and a real one on a port: the same answers."""

from __future__ import annotations

import os
import signal
import socket
import subprocess
import sys
import time

import pytest
from stagesum import Client, InvalidChain, MissingExtra
from stagesum_server.engine import budget as engine
from stagesum_server.web import budget as view


@pytest.fixture(autouse=True)
def no_url(monkeypatch):
    monkeypatch.delenv("STAGESUM_URL", raising=False)


def test_the_client_returns_the_very_record_that_the_engine_made(monkeypatch, example):
    made = []
    monkeypatch.setattr(view, "compute", lambda *a, **k: made.append(engine.compute(*a, **k)) or made[0])
    with Client() as client:
        assert client.budget(example) == made[0]


def test_faults_come_through(example):
    example["stages"][0]["gain"] = 0
    with Client() as client, pytest.raises(InvalidChain) as refusal:
        client.budget(example)
    assert [fault.pointer for fault in refusal.value.faults] == ["#/stages/0/gain"]


def test_the_embedded_service_is_healthy():
    with Client() as client:
        assert client.healthy()


def test_a_missing_extra_is_told_with_what_to_install(monkeypatch, example):
    monkeypatch.setitem(sys.modules, "stagesum_server.app", None)
    with Client() as client, pytest.raises(MissingExtra, match=r"pip install \"stagesum\[server\]\""):
        client.budget(example)


@pytest.fixture
def served():
    """``stagesum serve`` on a free port of the loopback interface."""
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        port = probe.getsockname()[1]
    command = [sys.executable, "-m", "stagesum.command", "serve", "--port", str(port), "--workers", "1"]
    process = subprocess.Popen(command, env=os.environ.copy(), stderr=subprocess.DEVNULL)
    client = Client(f"http://127.0.0.1:{port}", retries=0)
    for _ in range(150):
        if client.healthy():
            break
        time.sleep(0.1)
    yield client
    client.close()
    process.send_signal(signal.SIGTERM)
    process.wait(20)


def test_a_served_budget_equals_the_embedded_one(served, example):
    example["monte_carlo"]["trials"] = 70_000
    with Client() as embedded:
        assert served.budget(example) == embedded.budget(example)
