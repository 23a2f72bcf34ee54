"""The client against a scripted HTTP server on a free port: retries, timeouts, strange answers."""

from __future__ import annotations

import json
import socket
import subprocess
import sys
import threading
import time
import traceback
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer

import pytest
import requests
import stagesum
from stagesum import Client

EXPORTED = {
    "Budget",
    "Checks",
    "Client",
    "Contribution",
    "Fault",
    "Histogram",
    "Interval",
    "InvalidAddress",
    "InvalidChain",
    "Largest",
    "MissingExtra",
    "MonteCarlo",
    "Point",
    "PointConvolution",
    "PointMonteCarlo",
    "Problem",
    "RequestRefused",
    "Rss",
    "Service",
    "ServiceUnavailable",
    "StagesumError",
    "UnexpectedAnswer",
    "VarianceParts",
    "Verdict",
    "WorstCase",
    "__version__",
}
CHAIN = {"stages": []}
BUDGET = {
    "title": "scripted",
    "service": {"name": "stagesum", "version": "0", "contract": "v1"},
    "refer_to": "output",
    "unit": "V",
    "points": [{"input": 1.0, "conditions": {}, "nominal": 1.0, "a member of tomorrow": 1}],
    "governing_point": 0,
    "contributions": [],
    "variance_parts": {"unit": 1.0, "reading": 0.0},
    "assumptions": [],
    "cautions": [],
    "coverage": 0.95,
}


class Script:
    """Answers in turn, each (status, headers, body); the last one stays. Keeps what was asked."""

    def __init__(self):
        self.answers = []
        self.asked = []
        self.delay = 0.0

    def say(self, status, body=b"", **headers):
        """Add an answer; an underscore of a header's name stands for a hyphen."""
        text = json.dumps(body).encode() if isinstance(body, dict) else body
        self.answers.append((status, {name.replace("_", "-"): value for name, value in headers.items()}, text))


@pytest.fixture
def script():
    return Script()


@pytest.fixture
def url(script):
    class Handler(BaseHTTPRequestHandler):
        def answer(self):
            body = self.rfile.read(int(self.headers.get("Content-Length", 0)))
            script.asked.append((self.command, self.path, dict(self.headers), body))
            time.sleep(script.delay)
            status, headers, text = script.answers.pop(0) if len(script.answers) > 1 else script.answers[0]
            if status is None:  # hang up
                self.close_connection = True
                return
            self.send_response(status)
            for name, value in {"Content-Length": str(len(text)), **headers}.items():
                self.send_header(name, value)
            self.end_headers()
            self.wfile.write(text)

        do_GET = do_POST = answer  # noqa: N815 - the names that http.server calls

        def log_message(self, *_words):
            pass

    class Server(ThreadingHTTPServer):
        def handle_error(self, *_words):
            """A client that went away is part of the play."""

    server = Server(("127.0.0.1", 0), Handler)
    threading.Thread(target=server.serve_forever, kwargs={"poll_interval": 0.01}, daemon=True).start()
    yield f"http://127.0.0.1:{server.server_port}"
    server.shutdown()
    server.server_close()


@pytest.fixture
def ask(url):
    with Client(url, retries=2, timeout=5) as client:
        yield client.budget


def test_the_public_face_is_this_list_of_names():
    assert set(stagesum.__all__) == EXPORTED
    assert all(hasattr(stagesum, name) for name in EXPORTED)


def test_importing_the_client_loads_no_library_of_the_service():
    code = "import stagesum, stagesum.command, sys; print(*sys.modules)"
    loaded = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout.split()
    assert "stagesum.client" in loaded
    assert not {"flask", "marshmallow", "numpy", "scipy", "apispec", "stagesum_server.app"} & set(loaded)


def test_a_mapping_is_posted_as_json_and_the_answer_becomes_a_record(script, ask):
    script.say(200, BUDGET)
    budget = ask(CHAIN)
    assert isinstance(budget, stagesum.Budget)
    assert budget.points[0].nominal == 1.0
    method, path, headers, body = script.asked[0]
    assert (method, path, headers["Content-Type"]) == ("POST", "/v1/budget", "application/json")
    assert json.loads(body) == CHAIN


@pytest.mark.parametrize("as_path", [str, lambda path: path])
def test_a_file_is_sent_byte_for_byte_without_a_byte_order_mark(script, ask, tmp_path, as_path):
    script.say(200, BUDGET)
    file = tmp_path / "chain.json"
    file.write_bytes(b'\xef\xbb\xbf{ "stages" :\n[] }')
    ask(as_path(file))
    assert script.asked[0][3] == b'{ "stages" :\n[] }'


def test_a_missing_file_raises_the_error_of_python(ask, tmp_path):
    with pytest.raises(FileNotFoundError):
        ask(tmp_path / "nothing.json")


@pytest.mark.parametrize("value", [float("nan"), float("inf")])
def test_a_number_that_json_has_not_is_never_sent(script, ask, value):
    with pytest.raises(ValueError, match="JSON"):
        ask({"coverage": value})
    assert not script.asked


@pytest.mark.parametrize("status", [429, 502, 503, 504])
def test_a_busy_service_is_asked_again(script, ask, status):
    script.say(status, Retry_After="0")
    script.say(200, BUDGET)
    assert ask(CHAIN).title == "scripted"
    assert len(script.asked) == 2


def test_a_service_that_stays_busy_is_unavailable_after_all_retries(script, ask):
    script.say(503, {"detail": "All slots are taken."}, Retry_After="0")
    with pytest.raises(stagesum.ServiceUnavailable, match="All slots are taken"):
        ask(CHAIN)
    assert len(script.asked) == 3


def test_a_slow_calculation_is_not_started_twice(script, url):
    script.say(200, BUDGET)
    script.delay = 0.4
    with Client(url, timeout=0.1) as client, pytest.raises(stagesum.ServiceUnavailable, match=r"within .* 0\.1 s"):
        client.budget(CHAIN)
    assert len(script.asked) == 1


def test_a_request_whose_connection_is_lost_is_not_sent_again(script, ask):
    script.say(None)
    with pytest.raises(stagesum.ServiceUnavailable):
        ask(CHAIN)
    assert len(script.asked) == 1


def test_no_service_at_all_is_unavailable():
    with socket.socket() as free:  # bound and not listening: nobody else gets the port, and it refuses
        free.bind(("127.0.0.1", 0))
        address = f"http://127.0.0.1:{free.getsockname()[1]}"
        with Client(address, retries=0) as client:
            assert not client.healthy()
            with pytest.raises(stagesum.ServiceUnavailable, match="can't be reached"):
                client.budget(CHAIN)


@pytest.mark.parametrize("status", [400, 422])
def test_a_wrong_chain_carries_every_fault(script, ask, status):
    faults = [{"pointer": "#/stages", "detail": "found an empty list"}, {"pointer": "#/input", "detail": "is missing"}]
    script.say(status, {"type": "about:blank", "title": "No", "status": status, "detail": "2 faults", "errors": faults})
    with pytest.raises(stagesum.InvalidChain) as caught:
        ask(CHAIN)
    error = caught.value
    assert (error.status, error.title, error.detail) == (status, "No", "2 faults")
    assert [(fault.pointer, fault.detail) for fault in error.faults] == [tuple(f.values()) for f in faults]
    assert "#/input: is missing" in str(error)
    assert len(script.asked) == 1


def test_another_refusal_is_no_fault_of_the_chain(script, ask):
    script.say(413, {"title": "Too large", "status": 413, "detail": "The body has more than 5 bytes."})
    with pytest.raises(stagesum.RequestRefused, match="more than 5 bytes") as caught:
        ask(CHAIN)
    assert not isinstance(caught.value, stagesum.InvalidChain)


@pytest.mark.parametrize(
    ("status", "body"),
    [
        (200, b"<html>welcome</html>"),
        (200, b"\xff\xfe"),
        (200, b"[1]"),
        (200, {"title": "half a budget"}),
        (200, BUDGET | {"points": 3}),
        (204, b""),
        (404, b"<html>nothing here</html>"),
        (500, {"detail": "A defect of the service; it has been logged."}),
    ],
)
def test_an_answer_that_no_service_gives_is_unexpected(script, ask, status, body):
    script.say(status, body)
    with pytest.raises(stagesum.UnexpectedAnswer):
        ask(CHAIN)


def test_a_redirect_is_told_and_not_followed(script, ask):
    """A library that follows it would turn the POST into a GET."""
    script.say(301, Location="https://elsewhere.example/v1/budget")
    with pytest.raises(stagesum.UnexpectedAnswer, match=r"redirects to 'https://elsewhere\.example/v1/budget'"):
        ask(CHAIN)
    assert len(script.asked) == 1


def test_an_answer_that_breaks_off_is_told(script, ask):
    script.say(200, b"{", Content_Length="100")
    with pytest.raises((stagesum.UnexpectedAnswer, stagesum.ServiceUnavailable)):
        ask(CHAIN)


@pytest.mark.parametrize(
    "address", ["localhost:8000", "ftp://host", "http://", "http://host:port", "file:///etc/hosts"]
)
def test_a_wrong_address_is_refused(address):
    with pytest.raises(stagesum.InvalidAddress, match="found the address"), Client(address) as client:
        client.budget(CHAIN)


@pytest.mark.parametrize("rest", ["127.0.0.1:9", "127.0.0.1:99999", "host:port"])
def test_a_password_in_the_address_stays_out_of_messages(rest):
    with pytest.raises(stagesum.StagesumError) as caught, Client(f"http://me:secret@{rest}", retries=0) as client:
        client.budget(CHAIN)
    assert "//***@" in str(caught.value)
    assert "secret" not in "".join(traceback.format_exception(caught.value))


def test_the_address_comes_from_the_environment_and_an_argument_comes_first(monkeypatch):
    monkeypatch.setenv("STAGESUM_URL", "http://one.example/")
    assert Client().url == "http://one.example"
    assert Client("http://two.example").url == "http://two.example"


def test_a_session_of_the_caller_is_used_and_stays_open(script, url):
    script.say(200, {"status": "ok"})
    closed = []

    class Session(requests.Session):
        def close(self):
            closed.append(True)
            super().close()

    with Session() as session:
        session.headers["Authorization"] = "Bearer abc"
        with Client(url, session=session) as client:
            assert client.healthy()
        assert not closed
    assert script.asked[0][1:2] == ("/healthz",)
    assert script.asked[0][2]["Authorization"] == "Bearer abc"


def test_every_exception_stands_below_one():
    names = EXPORTED - {"StagesumError"}
    errors = [getattr(stagesum, name) for name in names if isinstance(getattr(stagesum, name), type)]
    raised = [error for error in errors if issubclass(error, Exception)]
    assert len(raised) == 6
    assert all(issubclass(error, stagesum.StagesumError) for error in raised)
