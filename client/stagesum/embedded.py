"""The service inside this process: a requests transport that calls its WSGI application.

No port is opened. A client with no URL mounts it, so both ways of asking share every line of
client code and every check of the service.
"""

from __future__ import annotations

import io
import sys
from functools import cache
from typing import TYPE_CHECKING, Any
from urllib.parse import unquote, urlsplit

from requests.adapters import BaseAdapter, HTTPAdapter
from urllib3 import HTTPHeaderDict, HTTPResponse

from stagesum.errors import MissingExtra, ServiceUnavailable

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Mapping

    from requests import PreparedRequest, Response

ADDRESS = "embedded://stagesum"


@cache
def _application() -> Callable[..., Iterable[bytes]]:
    """Make the application once for all clients of this process.

    Raises
    ------
    MissingExtra
        Where a library of the service isn't installed.
    ServiceUnavailable
        Where a STAGESUM_* variable has a wrong value.

    """
    try:
        from stagesum_server.app import create_app
    except ModuleNotFoundError as error:
        raise MissingExtra(error.name or "a library") from error
    try:
        return create_app().wsgi_app
    except ValueError as error:
        raise ServiceUnavailable(f"the embedded service does not start: {error}") from error


class EmbeddedAdapter(BaseAdapter):
    """Transport for :data:`ADDRESS`; timeouts and retries have no meaning here.

    Raises
    ------
    MissingExtra, ServiceUnavailable
        When it is made, where the service can't be had in this process.

    """

    def __init__(self) -> None:
        super().__init__()
        self._application = _application()

    def send(self, request: PreparedRequest, *_args: Any, **_options: Any) -> Response:
        """Answer ``request`` in the calling thread."""
        started: list[tuple[str, list[tuple[str, str]]]] = []

        def start_response(status: str, headers: list[tuple[str, str]], _exc_info: Any = None) -> None:
            started.append((status, headers))

        parts = self._application(_environment(request), start_response)
        try:
            body = b"".join(parts)
        finally:
            getattr(parts, "close", lambda: None)()
        status, headers = started[-1]
        return _response(request, status, headers, body)

    def close(self) -> None:
        """Nothing is held open."""


def _environment(request: PreparedRequest) -> dict[str, Any]:
    """Write the request as PEP 3333 wants it."""
    split = urlsplit(request.url or "")
    body = request.body or b""
    raw = body.encode() if isinstance(body, str) else body
    return {
        "REQUEST_METHOD": request.method,
        "SCRIPT_NAME": "",
        "PATH_INFO": unquote(split.path, "latin-1"),
        "QUERY_STRING": split.query,
        "SERVER_NAME": split.hostname,
        "SERVER_PORT": "80",
        "SERVER_PROTOCOL": "HTTP/1.1",
        "REMOTE_ADDR": "127.0.0.1",
        "wsgi.version": (1, 0),
        "wsgi.url_scheme": "http",
        "wsgi.input": io.BytesIO(raw),
        "wsgi.errors": sys.stderr,
        "wsgi.multithread": True,
        "wsgi.multiprocess": False,
        "wsgi.run_once": False,
        **_header_variables(request.headers),
        "CONTENT_LENGTH": str(len(raw)),
    }


def _header_variables(headers: Mapping[str, str]) -> dict[str, str]:
    """CGI names of the headers; the content's type has no prefix."""
    variables = {f"HTTP_{name.upper().replace('-', '_')}": str(value) for name, value in headers.items()}
    variables["CONTENT_TYPE"] = variables.pop("HTTP_CONTENT_TYPE", "")
    variables.pop("HTTP_CONTENT_LENGTH", None)
    return variables


def _response(request: PreparedRequest, status: str, headers: list[tuple[str, str]], body: bytes) -> Response:
    """Give the answer the form that every other transport gives it."""
    code, _, reason = status.partition(" ")
    raw = HTTPResponse(io.BytesIO(body), HTTPHeaderDict(headers), int(code), reason=reason, preload_content=False)
    return HTTPAdapter().build_response(request, raw)
