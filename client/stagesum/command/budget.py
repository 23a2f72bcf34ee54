"""``stagesum budget``: ask for one chain, show the table, and tell the verdict by the exit status."""

from __future__ import annotations

import json
import math
import sys
from typing import TYPE_CHECKING, BinaryIO

import click

from stagesum.client import Client
from stagesum.command import table
from stagesum.errors import InvalidAddress, RequestRefused, StagesumError

if TYPE_CHECKING:
    from typing import NoReturn

    from stagesum_schemas.records import Budget

MET, NOT_MET, WRONG_REQUEST, NO_SERVICE = range(4)
CONNECT_TIMEOUT = 3.05
LONGEST_TIMEOUT = 86_400  # seconds, a day; the system refuses what is far above


def _finite(_context: click.Context, _option: click.Parameter, value: float) -> float:
    """Refuse NaN, which no range does."""
    if math.isnan(value):
        raise click.BadParameter("found nan; write a number of seconds")
    return value


@click.command()
@click.argument("chain", type=click.File("rb"))
@click.option("--url", metavar="URL", help="Address of a service; else STAGESUM_URL; else it runs in this process.")
@click.option("--json", "as_json", is_flag=True, help="Print the whole answer as JSON instead of the table.")
@click.option(
    "--timeout",
    type=click.FloatRange(min=0, min_open=True, max=LONGEST_TIMEOUT),
    callback=_finite,
    default=60.0,
    show_default=True,
    metavar="SECONDS",
    help="How long to wait for the answer.",
)
def budget(chain: BinaryIO, url: str | None, as_json: bool, timeout: float) -> None:
    """Compute the error budget of CHAIN, a JSON file (- reads standard input).

    Exit status: 0 the limit is met, or none is given; 1 it is not met, or that is undecided;
    2 the request is wrong; 3 the service can't be reached or is broken.
    """
    answer = _ask(_text(chain), url, timeout)
    click.echo(json.dumps(answer.to_dict(), indent=2) if as_json else table.draw(answer))
    sys.exit(MET if answer.verdict is None or answer.verdict.overall == "pass" else NOT_MET)


def _text(chain: BinaryIO) -> bytes:
    try:
        return chain.read()
    except OSError as error:
        _end(WRONG_REQUEST, f"{chain.name} can't be read: {error.strerror}")


def _ask(text: bytes, url: str | None, timeout: float) -> Budget:
    """Give the answer, or end with a sentence and the status that stands for the failure."""
    try:
        with Client(url, timeout=(min(CONNECT_TIMEOUT, timeout), timeout)) as client:
            return client.budget(text)
    except RequestRefused as error:
        faults = [f"{fault.pointer}: {fault.detail}" for fault in error.faults]
        _end(WRONG_REQUEST, *(faults or [f"{error.title}: {error.detail}"]))
    except InvalidAddress as error:
        _end(WRONG_REQUEST, str(error))
    except StagesumError as error:
        _end(NO_SERVICE, str(error))


def _end(status: int, *lines: str) -> NoReturn:
    for line in lines:
        click.echo(f"stagesum: {table.printable(line)}", err=True)
    sys.exit(status)
