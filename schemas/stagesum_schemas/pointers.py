"""Places in a body: RFC 6901 JSON Pointers, written as URI fragments."""

from __future__ import annotations

from typing import Any
from urllib.parse import quote, unquote

from stagesum_schemas.records import Fault

FRAGMENT = "!$&'()*+,;=:@?-._~"  # beside letters and digits, what RFC 3986, 3.5 lets stand in a fragment
WHOLE = "_schema"  # where marshmallow files what concerns an object as a whole


def member(name: str) -> str:
    """Escape one member's name (RFC 6901, 3 and 6).

    >>> member("supply/5 V")
    'supply~15%20V'
    """
    return quote(name.replace("~", "~0").replace("/", "~1"), safe=FRAGMENT)


def faults(messages: Any, body: Any, pointer: str = "#") -> tuple[Fault, ...]:
    """Turn marshmallow's messages for a body into faults.

    A place that isn't in the body, such as a missing member, is pointed at by its parent, so that every pointer
    resolves.
    """
    if isinstance(messages, dict):
        found: list[Fault] = []
        for key, inner in messages.items():
            found += faults(inner, *_step(key, body, pointer))
        return tuple(found)
    texts = messages if isinstance(messages, list) else [messages]
    return tuple(Fault(pointer, str(text)) for text in texts)


def in_body_order(found: tuple[Fault, ...], body: Any) -> tuple[Fault, ...]:
    """Sort faults as their places stand in the body; an object's own come before those of its members."""
    order: dict[int, dict[str, int]] = {}  # places of the members of each object met, listed once
    return tuple(sorted(found, key=lambda fault: _position(fault.pointer, body, order)))


def _position(pointer: str, body: Any, order: dict[int, dict[str, int]]) -> tuple[int, ...]:
    """Where each step of a pointer stands among its neighbours; ends where the body ends."""
    positions = []
    for step in pointer.split("/")[1:]:
        name = unquote(step).replace("~1", "/").replace("~0", "~")
        if isinstance(body, dict) and name in body:
            if id(body) not in order:
                order[id(body)] = {key: place for place, key in enumerate(body)}
            positions.append(order[id(body)][name])
            body = body[name]
        elif isinstance(body, list) and name.isdecimal() and int(name) < len(body):
            positions.append(int(name))
            body = body[int(name)]
        else:
            break
    return tuple(positions)


def _step(key: Any, body: Any, pointer: str) -> tuple[Any, str]:
    """The part of the body under ``key`` and its pointer; where there is none, the parent."""
    if isinstance(body, dict) and key in body:
        return body[key], f"{pointer}/{member(str(key))}"
    if isinstance(body, list) and isinstance(key, int) and 0 <= key < len(body):
        return body[key], f"{pointer}/{key}"
    return (body if key == WHOLE else None), pointer
