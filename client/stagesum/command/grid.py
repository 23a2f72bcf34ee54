"""Aligned plain text: columns side by side, wrapped paragraphs, bars."""

from __future__ import annotations

import textwrap
from dataclasses import dataclass
from itertools import groupby
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Sequence

WIDTH = 120
GAP = "  "


@dataclass(frozen=True, slots=True)
class Column:
    """A heading and a cell a row; neighbours of one ``group`` stay together below its name."""

    head: str
    cells: tuple[str, ...]
    group: str = ""
    left: bool = False

    def lines(self) -> list[str]:
        """Heading and cells, padded to one width; numbers stand at the right."""
        texts = (self.head, *self.cells)
        width = max(map(len, texts))
        return [text.ljust(width) if self.left else text.rjust(width) for text in texts]


def grid(keys: Sequence[Column], others: Sequence[Column]) -> list[str]:
    """Set columns side by side; where they don't fit, several grids below each other repeat the ``keys``."""
    key_blocks = _blocks(keys)
    lines: list[str] = []
    for part in _parts(_width(key_blocks), _blocks(others)):
        lines += [""] if lines else []
        rows = [GAP.join(row).rstrip() for row in zip(*key_blocks, *part, strict=True)]
        lines += rows if rows[0] else rows[1:]
    return lines


def _blocks(columns: Sequence[Column]) -> list[list[str]]:
    """Join the columns of a group and set its name above them, over dashes."""
    blocks = []
    for name, members in groupby(columns, key=lambda column: column.group):
        rows = [GAP.join(row) for row in zip(*(column.lines() for column in members), strict=True)]
        width = max(len(rows[0]), len(name))
        title = f" {name} ".center(width, "-") if name else ""
        blocks.append([title.ljust(width), *(row.rjust(width) for row in rows)])
    return blocks


def _width(blocks: Iterable[list[str]]) -> int:
    return sum(len(block[0]) + len(GAP) for block in blocks)


def _parts(taken: int, blocks: Sequence[list[str]]) -> Iterator[list[list[str]]]:
    """Fill one line's width after the other with blocks."""
    part: list[list[str]] = []
    for block in blocks:
        if part and taken + _width([*part, block]) > WIDTH + len(GAP):
            yield part
            part = []
        part.append(block)
    yield part


def paragraph(text: str, first: str, rest: str) -> list[str]:
    """Wrap a sentence to the width."""
    return textwrap.wrap(text, WIDTH, initial_indent=first, subsequent_indent=rest) or [first.rstrip()]


def bar(share: float, width: int = 10) -> str:
    """Draw a share of one as a bar; what rounds to nothing but isn't nothing gets a dot.

    >>> bar(0.5), bar(0.001), bar(0.0)
    ('#####', '.', '')

    """
    length = min(max(round(share * width), 0), width)
    return "#" * length or ("." if share > 0.0 else "")


def cut(text: str, width: int) -> str:
    """Shorten a name that is too long for its column."""
    return text if len(text) <= width else f"{text[: width - 2]}.."
