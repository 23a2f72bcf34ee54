"""Gathering faults, each with its place."""

from __future__ import annotations

from stagesum_schemas.records import Fault


class InvalidRequest(Exception):  # noqa: N818 - it is the request that is invalid
    """A body whose form is right but which is no valid chain; ``faults`` has all of them."""

    def __init__(self, faults: tuple[Fault, ...]) -> None:
        super().__init__("; ".join(f"{fault.pointer}: {fault.detail}" for fault in faults))
        self.faults = faults


class Faults:
    """Collects faults; ``escape`` makes a name safe inside a pointer (RFC 6901 as URI fragment)."""

    def __init__(self) -> None:
        self.found: list[Fault] = []

    def add(self, pointer: str, detail: str) -> None:
        """Note one fault at ``pointer`` (``#/stages/0/gain``)."""
        self.found.append(Fault(pointer, detail))

    def refuse(self) -> None:
        """Raise what was found, if anything.

        Raises
        ------
        InvalidRequest
            With all faults so far.

        """
        if self.found:
            raise InvalidRequest(tuple(self.found))
