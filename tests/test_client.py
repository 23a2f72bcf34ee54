"""The client against a small scripted server: retries, time-outs, bad answers, and which exception stands for what."""

from __future__ import annotations

import json
import subprocess
import sys
import threading
import time
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer
from pathlib import Path
from typing import Any

import pytest
import stagesum
from stagesum import Client, InvalidChain, RequestRefused, ServiceUnavailable, UnexpectedAnswer

CHAIN = {
    "input": {"unit": "V", "values": [1]},
    "stages": [{"name": "buffer", "gain": 1, "sources": [{"name": "offset", "effect": "offset", "max": "3 mV"}]}],
    "methods": ["worst_case", "rss"],
}
PROBLEM = {"type": "about:blank", "title": "Not a valid chain", "status": 422, "detail": "1 fault"}


@pytest.fixture(scope="session")
def true_answer(post) -> dict[str, Any]:
    return post("/v1/budget", CHAIN)


@pytest.fixture
def scripted():
    """Start a server that gives the scripted answers in turn, the last one for ever; it notes what it was asked."""
    servers = []

    def start(*answers: tuple[int, dict[str, str], bytes], delay: float = 0.0):
        asked: list[bytes] = []

        class Handler(BaseHTTPRequestHandler):
            def do_POST(self):
                asked.append(self.rfile.read(int(self.headers["Content-Length"])))
                time.sleep(delay)
                status, headers, body = answers[min(len(asked), len(answers)) - 1]
                self.send_response(status)
                for name, value in {"Content-Length": str(len(body)), **headers}.items():
                    self.send_header(name, value)
                self.end_headers()
                self.wfile.write(body)

            def log_message(self, *args):
                pass

        server = ThreadingHTTPServer(("127.0.0.1", 0), Handler)
        threading.Thread(target=server.serve_forever, daemon=True).start()
        servers.append(server)
        return f"http://127.0.0.1:{server.server_port}", asked

    yield start
    for server in servers:
        server.shutdown()
        server.server_close()


def test_the_answer_is_the_record_that_was_sent(scripted, true_answer):
    url, asked = scripted((200, {}, json.dumps(true_answer).encode()))
    with Client(url) as client:
        budget = client.budget(CHAIN)
    assert budget.to_dict() == true_answer
    assert budget.points[0].worst_case.upper == 0.003
    assert json.loads(asked[0]) == CHAIN


def test_a_busy_service_is_tried_again(scripted, true_answer):
    busy = (503, {"Retry-After": "0"}, b"{}")
    url, asked = scripted(busy, busy, (200, {}, json.dumps(true_answer).encode()))
    with Client(url) as client:
        client.budget(CHAIN)
    assert len(asked) == 3


def test_a_service_that_stays_busy_is_unavailable(scripted):
    url, asked = scripted((503, {"Retry-After": "0"}, b"{}"))
    with Client(url, retries=1) as client, pytest.raises(ServiceUnavailable, match="busy"):
        client.budget(CHAIN)
    assert len(asked) == 2


def test_a_slow_answer_is_not_computed_twice(scripted):
    url, asked = scripted((200, {}, b"{}"), delay=0.6)
    with Client(url, timeout=0.2) as client, pytest.raises(ServiceUnavailable, match="in time"):
        client.budget(CHAIN)
    assert len(asked) == 1


def test_nobody_listening_is_unavailable():
    with Client("http://127.0.0.1:9", retries=0) as client:
        assert not client.healthy()
        with pytest.raises(ServiceUnavailable, match="can't be reached"):
            client.budget(CHAIN)


def test_faults_come_with_their_places(scripted):
    fault = {"pointer": "#/stages/0/gain", "detail": "gain 0 lets nothing through"}
    url, _ = scripted((422, {}, json.dumps(PROBLEM | {"errors": [fault]}).encode()))
    with Client(url) as client, pytest.raises(InvalidChain) as refusal:
        client.budget(CHAIN)
    assert refusal.value.status == 422
    assert refusal.value.faults == (stagesum.Fault(**fault),)
    assert "#/stages/0/gain: gain 0 lets nothing through" in str(refusal.value)


def test_another_refusal_is_no_invalid_chain(scripted):
    url, _ = scripted((413, {}, json.dumps(PROBLEM | {"status": 413}).encode()))
    with Client(url) as client, pytest.raises(RequestRefused) as refusal:
        client.budget(CHAIN)
    assert not isinstance(refusal.value, InvalidChain)


@pytest.mark.parametrize(
    ("status", "body"), [(200, b"<html>hello</html>"), (200, b"[1]"), (500, b"{}"), (404, b"not here"), (302, b"")]
)
def test_what_is_none_of_the_contracts_is_unexpected(scripted, status, body):
    url, _ = scripted((status, {}, body))
    with Client(url) as client, pytest.raises(UnexpectedAnswer):
        client.budget(CHAIN)


def test_a_chain_may_be_a_path(scripted, true_answer, tmp_path):
    file = tmp_path / "chain.json"
    file.write_text(json.dumps(CHAIN))
    url, asked = scripted((200, {}, json.dumps(true_answer).encode()))
    with Client(url) as client:
        client.budget(file)
        client.budget(str(file))
    assert [json.loads(body) for body in asked] == [CHAIN, CHAIN]


def test_the_environment_names_the_service(monkeypatch):
    monkeypatch.setenv("STAGESUM_URL", "http://budget.example/")
    assert Client().url == "http://budget.example"
    assert Client("http://other.example").url == "http://other.example"


def test_the_public_names_are_these():
    assert sorted(stagesum.__all__) == [
        "Budget",
        "Client",
        "Contribution",
        "Fault",
        "InvalidChain",
        "MissingExtra",
        "Point",
        "RequestRefused",
        "ServiceUnavailable",
        "StagesumError",
        "UnexpectedAnswer",
        "Verdict",
        "__version__",
    ]
    assert all(hasattr(stagesum, name) for name in stagesum.__all__)


def test_importing_the_client_loads_nothing_of_the_service():
    code = "import stagesum, sys; print(*sys.modules)"
    loaded = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout.split()
    assert not {"flask", "marshmallow", "numpy", "scipy", "stagesum_server"} & set(loaded)


def test_the_examples_of_client_and_contract_are_the_same():
    root = Path(__file__).parents[1]
    one = root / "client/stagesum/examples/irrigation_transmitter.json"
    other = root / "schemas/stagesum_schemas/example_budget.json"
    assert json.loads(one.read_text()) == json.loads(other.read_text())
