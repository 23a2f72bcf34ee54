"""The client: one method an endpoint."""

from __future__ import annotations

import json
import os
import re
from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any, Self

import requests
from requests.adapters import HTTPAdapter
from stagesum_schemas.records import Budget, Problem
from urllib3.util import Retry

from stagesum import embedded
from stagesum.errors import (
    InvalidAddress,
    InvalidChain,
    RequestRefused,
    ServiceUnavailable,
    StagesumError,
    UnexpectedAnswer,
)

if TYPE_CHECKING:
    from requests import Response, Session


URL_VARIABLE = "STAGESUM_URL"
BUSY = (429, 502, 503, 504)  # statuses that say: later
LONGEST_WAIT = 30  # seconds that a Retry-After header may ask for
BYTE_ORDER_MARK = b"\xef\xbb\xbf"  # some editors write it; JSON has none
SHOWN = 200  # characters of a strange answer that a message repeats


class Client:
    """A client of the service; usable in a ``with`` statement, which closes its session.

    Parameters
    ----------
    url : str, optional
        Address of a running service, such as ``http://127.0.0.1:8000``. Without one the variable
        STAGESUM_URL is taken; without that too, the service runs inside this process, with no port
        and no set-up (it needs ``pip install "stagesum[server]"``).
    timeout : float or (float, float)
        Seconds to wait for a connection and for the answer; one number stands for both.
    retries : int
        How often a request is tried again after a refused connection or a status that says "later".
        A timeout or a connection lost on the way isn't: the calculation may be running.
    session : requests.Session, optional
        A session of the caller's own (certificates, proxies, retries of its own); it stays open.

    Raises
    ------
    InvalidAddress
        Where ``url`` is no http or https URL.
    MissingExtra
        Where there is no URL and the service isn't installed.

    Examples
    --------
    >>> from stagesum import Client
    >>> chain = {"input": {"unit": "V", "values": [1]}, "methods": ["worst_case"],
    ...          "stages": [{"name": "buffer", "gain": 1, "sources": [
    ...              {"name": "offset", "effect": "offset", "max": "2 mV"}]}]}
    >>> with Client() as client:
    ...     budget = client.budget(chain)
    >>> print(budget.points[0].worst_case.upper, budget.unit)
    0.002 V

    """

    def __init__(
        self,
        url: str | None = None,
        *,
        timeout: float | tuple[float, float] = (3.05, 60),
        retries: int = 4,
        session: Session | None = None,
    ) -> None:
        self.url = _address(url or os.environ.get(URL_VARIABLE) or embedded.ADDRESS)
        self._timeout = timeout
        self._owned = session is None
        self._session = session or _session(retries)
        if self.url == embedded.ADDRESS:
            self._session.mount(embedded.ADDRESS, embedded.EmbeddedAdapter())

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_exc_info: object) -> None:
        self.close()

    def close(self) -> None:
        """Close the session, unless the caller brought it."""
        if self._owned:
            self._session.close()

    def budget(self, chain: Mapping[str, Any] | str | os.PathLike[str] | bytes) -> Budget:
        """Ask for the error budget of a chain (``POST /v1/budget``).

        Parameters
        ----------
        chain : mapping, path or bytes
            The request as a mapping, the path of a JSON file, or the JSON text itself as bytes.

        Returns
        -------
        Budget
            Numbers are in ``budget.unit`` where a field says nothing else.

        Raises
        ------
        InvalidChain
            Where the chain isn't valid; ``faults`` has every fault.
        RequestRefused, ServiceUnavailable, UnexpectedAnswer
            See :mod:`stagesum.errors`.
        OSError, TypeError, ValueError
            Where the file can't be read, or the mapping can't be written as JSON.

        """
        answer = self._ask("POST", "/v1/budget", _body(chain))
        try:
            return Budget.from_dict(answer)
        except (TypeError, AttributeError, KeyError) as error:
            said = f"{self.url} answered JSON that is no budget: {error}"
            raise UnexpectedAnswer(_without_password(said)) from error

    def healthy(self) -> bool:
        """Tell whether the service answers (``GET /healthz``); never raises for a service that doesn't."""
        try:
            return self._ask("GET", "/healthz").get("status") == "ok"
        except StagesumError:
            return False

    def _ask(self, method: str, path: str, body: bytes | None = None) -> dict[str, Any]:
        """Send one request and give the JSON object of its answer."""
        headers = {"Accept": "application/json"} | ({"Content-Type": "application/json"} if body is not None else {})
        try:
            response = self._session.request(
                method, self.url + path, data=body, headers=headers, timeout=self._timeout, allow_redirects=False
            )
        except requests.Timeout as error:
            said = f"{self.url} gave no answer within the timeout of {self._timeout} s"
            raise ServiceUnavailable(_without_password(said)) from error
        except (requests.ConnectionError, requests.exceptions.RetryError) as error:
            raise ServiceUnavailable(_without_password(f"{self.url} can't be reached: {error}")) from error
        except (requests.exceptions.InvalidURL, requests.exceptions.InvalidSchema) as error:
            # Not chained: the message below repeats the address as it is.
            raise InvalidAddress(_without_password(f"found the address {self.url!r}: {error}")) from None
        except requests.RequestException as error:
            raise UnexpectedAnswer(_without_password(f"the answer of {self.url} can't be read: {error}")) from error
        return _read(response)


def _address(url: str) -> str:
    """Check the form of an address; a slash at its end is dropped."""
    if url != embedded.ADDRESS and not url.lower().startswith(("http://", "https://")):
        said = f"found the address {url!r}; write it as http://host:port or https://host"
        raise InvalidAddress(_without_password(said))
    return url.rstrip("/")


def _without_password(message: str) -> str:
    """Blank what stands before the host in an address: messages end up in logs."""
    return re.sub(r"//[^/\s]*@", "//***@", message)


def _session(retries: int) -> Session:
    """Make a session that tries again where that can't start a calculation twice."""
    # ``read=False``: a timeout or a lost connection after the request was sent is raised as it is.
    policy = Retry(
        total=retries,
        connect=min(retries, 3),
        read=False,
        status=retries,
        status_forcelist=BUSY,
        allowed_methods={"GET", "POST"},  # a budget changes nothing at the service
        backoff_factor=0.2,
        backoff_jitter=0.2,
        raise_on_status=False,
        retry_after_max=LONGEST_WAIT,
    )
    session = requests.Session()
    session.mount("http://", HTTPAdapter(max_retries=policy))
    session.mount("https://", HTTPAdapter(max_retries=policy))
    return session


def _body(chain: Mapping[str, Any] | str | os.PathLike[str] | bytes) -> bytes:
    """Give the JSON text to send; a file goes as it is, so that faults name its lines."""
    if isinstance(chain, Mapping):
        return json.dumps(dict(chain), allow_nan=False).encode()
    text = chain if isinstance(chain, bytes) else Path(chain).read_bytes()
    return text.removeprefix(BYTE_ORDER_MARK)


def _read(response: Response) -> dict[str, Any]:
    """Turn a status into an exception, or give the JSON object of a 200."""
    if response.status_code in BUSY:
        said = _object(response).get("detail") or response.reason
        raise ServiceUnavailable(f"the service is too busy or being restarted ({response.status_code}): {said}")
    answer = _object(response)
    if response.status_code == 200 and answer:
        return answer
    if 400 <= response.status_code < 500 and "detail" in answer:
        raise _refusal(response.status_code, answer)
    raise UnexpectedAnswer(_without_password(_strange(response)))


def _object(response: Response) -> dict[str, Any]:
    """Give the JSON object of a body; an empty one where it is something else."""
    try:
        value = response.json()
    except ValueError:
        return {}
    return value if isinstance(value, dict) else {}


def _refusal(status: int, answer: dict[str, Any]) -> RequestRefused:
    problem = Problem.from_dict({"type": "about:blank", "title": "Refused", **answer, "status": status})
    return InvalidChain(problem) if status in (400, 422) else RequestRefused(problem)


def _strange(response: Response) -> str:
    if response.is_redirect:
        target = response.headers.get("Location")
        return f"{response.url} redirects to {target!r}; give the address that it leads to"
    return f"{response.url} answered {response.status_code} {response.reason}: {response.text[:SHOWN]!r}"
