"""A budget as plain text for a terminal, at most 120 columns wide; what the answer hasn't is left out."""

from __future__ import annotations

from typing import TYPE_CHECKING

from stagesum.command import methods, operating_points, sources
from stagesum.command.figures import percent, short
from stagesum.command.grid import WIDTH, paragraph

if TYPE_CHECKING:
    from stagesum_schemas.records import Budget


def draw(budget: Budget) -> str:
    """Draw all sections; control characters in names are replaced."""
    sections = (
        _head(budget),
        operating_points.section(budget),
        methods.section(budget),
        sources.section(budget),
        _sentences("ASSUMPTIONS", budget.assumptions),
        _sentences("CAUTIONS", budget.cautions),
        methods.verdict(budget),
    )
    lines = [line for section in sections if section for line in (*section, "")]
    return "\n".join(printable(line) for line in lines[:-1])


def printable(text: str) -> str:
    """Replace what a terminal would obey instead of showing."""
    return "".join(letter if letter.isprintable() else "?" for letter in text)


def _head(budget: Budget) -> list[str]:
    title = budget.title or "Error budget"
    where = budget.refer_to if budget.refer_to in ("input", "output") else f"output of {budget.refer_to}"
    said = f"Error referred to the {where}, in {budget.unit or 'units of 1'}; coverage {percent(budget.coverage)}"
    span = "" if budget.span is None else f"; span {short(budget.span)} {budget.unit}".rstrip()
    title_lines = paragraph(title, "", "")
    return [*title_lines, "=" * min(max(map(len, title_lines)), WIDTH), *paragraph(said + span, "", "")]


def _sentences(heading: str, sentences: tuple[str, ...]) -> list[str]:
    if not sentences:
        return []
    return [heading, *(line for sentence in sentences for line in paragraph(sentence, "  - ", "    "))]
