"""Base of the marshmallow classes: members are closed, and a loaded object is a frozen record."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, ClassVar

from marshmallow import RAISE, Schema, fields, post_load

from stagesum_schemas.fields import SHORT, nearest

if TYPE_CHECKING:
    from marshmallow import ValidationError

MOST_TOLD = 20  # unknown members of one object that are told one by one: searching near names takes time


class RecordSchema(Schema):
    """Loads into the class named by ``record``; lists become tuples."""

    record: ClassVar[type]

    class Meta:
        """Unknown members are faults: a misspelt member would otherwise be ignored in silence."""

        unknown = RAISE

    def on_bind_field(self, field_name: str, field_obj: fields.Field[Any]) -> None:
        """Say of a missing member what it is for."""
        name = field_obj.data_key or field_name
        about = str(field_obj.metadata.get("description", "")).partition(".")[0]
        field_obj.error_messages["required"] = f"{name} is missing: {about}"

    def handle_error(self, error: ValidationError, data: Any, **kwargs: Any) -> None:
        """Give unknown members a message that names the known ones and the one likely meant."""
        if not isinstance(data, dict) or not isinstance(error.messages, dict):
            return
        known = self.members()
        unknown = [name for name in data if name not in known]
        for name in unknown:  # marshmallow's own order of them changes from run to run
            error.messages.pop(name, None)
        for name in unknown[:MOST_TOLD]:
            error.messages[name] = [f"unknown member {name[:SHORT]!r}{nearest(name, known) or _known(known)}"]
        if len(unknown) > MOST_TOLD:
            error.messages[unknown[MOST_TOLD]] = [f"{len(unknown) - MOST_TOLD} more members are unknown"]

    @classmethod
    def members(cls) -> list[str]:
        """JSON names of all members."""
        return [field.data_key or name for name, field in cls._declared_fields.items()]

    @post_load
    def make(self, data: dict[str, Any], **kwargs: Any) -> Any:
        """Make the record."""
        return self.record(**{name: tuple(v) if isinstance(v, list) else v for name, v in data.items()})


def _known(names: list[str]) -> str:
    return f"; known here: {', '.join(names)}"
