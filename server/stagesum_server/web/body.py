"""Reading a body as JSON, strictly: RFC 8259 and nothing beside it."""

from __future__ import annotations

import json
import math
from typing import TYPE_CHECKING, Any, NoReturn

from flask import request
from werkzeug.exceptions import BadRequest, UnsupportedMediaType

from stagesum_server.web.answer import JSON

if TYPE_CHECKING:
    from collections.abc import Callable

SHORT = 60


def read_json() -> Any:
    """Give the request's body.

    Raises
    ------
    UnsupportedMediaType, RequestEntityTooLarge, BadRequest
        With a sentence for the caller.

    """
    _refuse_other_media_types()
    return parse(request.get_data(cache=False))


def _refuse_other_media_types() -> None:
    if request.mimetype != JSON:
        raise UnsupportedMediaType(f"found content type {request.mimetype[:SHORT]!r}; send {JSON}")
    charset = request.mimetype_params.get("charset", "utf-8").lower()
    if charset not in ("utf-8", "utf8"):
        raise UnsupportedMediaType(f"found charset {charset[:SHORT]!r}; JSON is sent in utf-8")
    encoding = request.headers.get("Content-Encoding", "identity")
    if encoding != "identity":
        raise UnsupportedMediaType(f"found content encoding {encoding[:SHORT]!r}; send the body as it is")


def parse(raw: bytes) -> Any:
    """Parse a JSON text.

    Raises
    ------
    BadRequest
        Where it isn't JSON, or JSON that different readers read differently.

    """
    try:
        text = raw.decode("utf-8")
    except UnicodeDecodeError as error:
        raise BadRequest(f"the body is not UTF-8: byte {error.start} is {raw[error.start]:#04x}") from None
    try:
        value = json.loads(
            text,
            object_pairs_hook=_object,
            parse_constant=_refuse_constant,
            parse_float=_bounded(float),
            parse_int=_bounded(int),
        )
    except json.JSONDecodeError as error:
        where = f"line {error.lineno}, column {error.colno}"
        raise BadRequest(f"the body is not JSON: {error.msg} ({where})") from None
    except RecursionError:
        raise BadRequest("the body's lists and objects are nested too deep") from None
    if "\\u" in text:  # only an escape can make half a surrogate pair out of valid UTF-8
        _refuse_lone_surrogates(value)
    return value


def _object(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    made = dict(pairs)
    if len(made) < len(pairs):
        seen: set[str] = set()
        twice = next(name for name, _ in pairs if name in seen or seen.add(name))  # type: ignore[func-returns-value]
        raise BadRequest(f"the member {twice[:SHORT]!r} stands twice in one object; write it once")
    return made


def _refuse_constant(name: str) -> NoReturn:
    raise BadRequest(f"found {name}, which is not JSON; write a finite number")


def _bounded(convert: Callable[[str], Any]) -> Callable[[str], Any]:
    def read(text: str) -> Any:
        if not math.isfinite(float(text)):
            raise BadRequest(f"found a number that is too large, {text[:SHORT]}")
        return convert(text)

    return read


def _refuse_lone_surrogates(value: Any) -> None:
    """Walk without recursion over all texts."""
    left = [value]
    while left:
        item = left.pop()
        if isinstance(item, dict):
            left += [*item.keys(), *item.values()]
        elif isinstance(item, list):
            left += item
        elif isinstance(item, str) and any("\ud800" <= letter <= "\udfff" for letter in item):
            raise BadRequest(f"found {item[:SHORT]!r}, which has half of a surrogate pair; it is no Unicode text")
