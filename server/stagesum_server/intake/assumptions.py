"""Assumptions: what the caller did not state, gathered so that equal ones stand once with all their sources."""

from __future__ import annotations


class Assumptions:
    """Collects sentences; ``note`` with a label groups all sources of one sentence."""

    def __init__(self) -> None:
        self.labels: dict[str, list[str]] = {}

    def note(self, sentence: str, label: str | None = None) -> None:
        """Note a sentence, for one source where ``label`` is given."""
        labels = self.labels.setdefault(sentence, [])
        if label is not None:
            labels.append(label)

    def sentences(self) -> tuple[str, ...]:
        """All sentences, each with its sources."""
        return tuple(
            sentence[0].upper() + sentence[1:] + (f": {', '.join(labels)}." if labels else ".")
            for sentence, labels in self.labels.items()
        )
