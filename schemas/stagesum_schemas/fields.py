"""Fields that take what they mean and nothing near it; each message says what was found and what would be right."""

from __future__ import annotations

import difflib
import math
import unicodedata
from typing import TYPE_CHECKING, Any

from marshmallow import ValidationError, fields, validate

from stagesum_schemas.units import Quantity, Unit, UnitError, parse_quantity, parse_unit

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

SHORT = 60  # characters of a value that a message repeats
LEAN = 5  # more characters for quotes and dots
MOST_WRONG = 50  # items of one list that are told to be wrong
LEAST, MOST = 1e-30, 1e30  # sizes of a figure; products of many stay far from the ends of double precision


def found(value: Any) -> str:
    """Tell a JSON value in a few words; never walks into it."""
    if isinstance(value, dict):
        return "an object"
    if isinstance(value, list):
        return f"a list of {len(value)}" if value else "an empty list"
    if value is None or isinstance(value, bool):
        return {None: "null", True: "true", False: "false"}[value]
    if isinstance(value, str):
        text = repr(value if len(value) <= SHORT else f"{value[:SHORT]}...")
        # escapes are longer than what they stand for
        return text if len(text) <= SHORT + LEAN else f"{text[:SHORT]}..."
    if isinstance(value, int) and abs(value) >= 10**SHORT:  # Python refuses to write out thousands of digits
        return f"an integer of more than {SHORT} digits"
    text = repr(value)
    return text if len(text) <= SHORT else f"{text[:SHORT]}..."


def nearest(name: str, names: Sequence[str]) -> str:
    """Suggest the name that was likely meant, as an ending of a sentence."""
    near = difflib.get_close_matches(name[:SHORT].casefold(), names, n=1)
    return f"; did you mean {near[0]}?" if near else ""


class Told(fields.Field[Any]):
    """Base: ``about`` and ``example`` go into the reference page, ``right`` ends every message."""

    right = "write a value"

    def __init__(self, about: str, *, example: Any = None, default: Any = None, **options: Any) -> None:
        extra: dict[str, Any] = options.pop("metadata", {})
        extra["description"] = about
        if example is not None:
            extra["examples"] = [example]
        if default is not None:
            extra["default"] = default
        super().__init__(metadata=extra, **options)

    def deserialize(
        self, value: Any, attr: str | None = None, data: Mapping[str, Any] | None = None, **kwargs: Any
    ) -> Any:
        """Refuse null with the field's own words, then go on as every field does."""
        if value is None:
            raise self.wrong(value)
        return super().deserialize(value, attr, data, **kwargs)

    def wrong(self, value: Any) -> ValidationError:
        """Make the error that says what was found and what would be right."""
        return ValidationError(f"found {found(value)}; {self.right}")


# ---------------------------------------------------------------------------------------------
# Quantities and units


class QuantityField(Told):
    """A string such as ``"150 uV"`` or a plain number, to ``units.Quantity``."""

    right = 'write a number and a unit, such as "150 uV", or a plain number'

    def _deserialize(self, value: Any, attr: str | None, data: Any, **kwargs: Any) -> Quantity:
        quantity = self._read(value)
        if quantity.value and not LEAST <= abs(quantity.value) <= MOST:
            raise ValidationError(f"found {found(value)}; write 0 or a number from {LEAST:g} to {MOST:g} in size")
        return quantity

    def _read(self, value: Any) -> Quantity:
        if isinstance(value, str):
            try:
                return parse_quantity(value)
            except UnitError as error:
                raise ValidationError(str(error)) from error
        number = _finite(value)
        if number is None:
            raise self.wrong(value)
        return Quantity(number, None, found(value))


class UnitField(Told):
    """A string such as ``"mV/bar"``, to ``units.Unit``."""

    right = 'write a unit, such as "bar" or "mV/K"'

    def _deserialize(self, value: Any, attr: str | None, data: Any, **kwargs: Any) -> Unit:
        if not isinstance(value, str):
            raise self.wrong(value)
        try:
            return parse_unit(value)
        except UnitError as error:
            raise ValidationError(str(error)) from error


# ---------------------------------------------------------------------------------------------
# Numbers, booleans, text


def _finite(value: Any) -> float | None:
    """The number as a float; None where it is none, or not finite."""
    if isinstance(value, bool) or not isinstance(value, int | float):
        return None
    try:
        number = float(value)
    except OverflowError:
        return None
    return number if math.isfinite(number) else None


def _range_words(low: float | None, high: float | None, inside: tuple[bool, bool]) -> str:
    """Words for a range: `` from 0 to 1``, `` above 0``; nothing for no range."""
    if low is not None and high is not None and all(inside):
        return f" from {low!r} to {high!r}"
    lower = "" if low is None else f" of at least {low!r}" if inside[0] else f" above {low!r}"
    upper = "" if high is None else f" at most {high!r}" if inside[1] else f" below {high!r}"
    return lower + (" and" if lower and upper else "") + upper


class Within(validate.Range):
    """A range whose message repeats the value in short and ends with ``right``."""

    right = ""

    def __call__(self, value: Any) -> Any:
        """Give the value back, or say what range is right."""
        try:
            return super().__call__(value)
        except ValidationError:
            raise ValidationError(f"found {found(value)}; {self.right}") from None


class Ranged(Told):
    """A number with a range; ``inside`` says whether each end belongs to it."""

    noun = "a number"

    def __init__(
        self,
        about: str,
        low: float | None = None,
        high: float | None = None,
        *,
        inside: tuple[bool, bool] = (True, True),
        **options: Any,
    ) -> None:
        self.right = f"write {self.noun}{_range_words(low, high, inside)}"
        if low is not None or high is not None:
            options["validate"] = within = Within(low, high, min_inclusive=inside[0], max_inclusive=inside[1])
            within.right = self.right
        super().__init__(about, **options)


class StrictNumber(Ranged, fields.Float):
    """A finite JSON number; no string, no boolean."""

    def _deserialize(self, value: Any, attr: str | None, data: Any, **kwargs: Any) -> float:
        number = _finite(value)
        if number is None:
            raise self.wrong(value)
        return number


class StrictInteger(Ranged, fields.Integer):
    """A JSON integer; 2.0 is none."""

    noun = "an integer"

    def _deserialize(self, value: Any, attr: str | None, data: Any, **kwargs: Any) -> int:
        if isinstance(value, bool) or not isinstance(value, int) or _finite(value) is None:
            raise self.wrong(value)
        return value


class StrictBoolean(Told, fields.Boolean):
    """``true`` or ``false``."""

    right = "write true or false"

    def _deserialize(self, value: Any, attr: str | None, data: Any, **kwargs: Any) -> bool:
        if not isinstance(value, bool):
            raise self.wrong(value)
        return value


class StrictText(Told, fields.String):
    """Text of bounded length without control characters or halves of surrogate pairs; ``without``: refused too."""

    def __init__(
        self, about: str, shortest: int | None = None, longest: int | None = None, *, without: str = "", **options: Any
    ) -> None:
        lengths = {"minLength": shortest, "maxLength": longest}
        self.shortest, self.longest, self.without = shortest or 0, longest or math.inf, without
        bounds = f" of {self.shortest} to {longest} characters" if longest is not None else ""
        self.right = f"write text{bounds}"
        given = {name: length for name, length in lengths.items() if length is not None}
        super().__init__(about, metadata={**options.pop("metadata", {}), **given}, **options)

    def _deserialize(self, value: Any, attr: str | None, data: Any, **kwargs: Any) -> str:
        if not isinstance(value, str):
            raise self.wrong(value)
        if not self.shortest <= len(value) <= self.longest:
            raise ValidationError(f"found {found(value)}, {len(value)} characters; {self.right}")
        odd = next((c for c in value if c in self.without or unicodedata.category(c) in ("Cc", "Cs")), None)
        if odd is not None:
            raise ValidationError(f"found {found(value)}; {odd!r} can't stand here, leave it out")
        return value


class Word(Told, fields.String):
    """One of a few words."""

    def __init__(self, about: str, words: Sequence[str], **options: Any) -> None:
        self.words = tuple(words)
        self.right = f"write one of {', '.join(self.words)}"
        super().__init__(about, metadata={"enum": list(self.words)}, **options)

    def _deserialize(self, value: Any, attr: str | None, data: Any, **kwargs: Any) -> str:
        if not isinstance(value, str):
            raise self.wrong(value)
        if value not in self.words:
            raise ValidationError(f"found {found(value)}; {self.right}{nearest(value, self.words)}")
        return value


# ---------------------------------------------------------------------------------------------
# Lists and objects


class ListOf(Told, fields.List[Any]):
    """A list of bounded length; with ``distinct`` no item stands twice. The length is looked at first."""

    def __init__(
        self,
        about: str,
        inner: fields.Field[Any],
        shortest: int | None = None,
        longest: int | None = None,
        *,
        distinct: bool = False,
        **options: Any,
    ) -> None:
        lengths = {"minItems": shortest, "maxItems": longest, "uniqueItems": distinct or None}
        self.shortest, self.longest, self.distinct = shortest or 0, longest or math.inf, distinct
        self.right = f"write a list{self._lengths(shortest, longest)}"
        given = {name: value for name, value in lengths.items() if value is not None}
        super().__init__(about, cls_or_instance=inner, metadata=given, **options)

    @staticmethod
    def _lengths(shortest: int | None, longest: int | None) -> str:
        if longest is None:
            return ""
        return f" of exactly {longest}" if shortest == longest else f" of {shortest or 0} to {longest}"

    def _deserialize(self, value: Any, attr: str | None, data: Any, **kwargs: Any) -> list[Any]:
        if not isinstance(value, list) or not self.shortest <= len(value) <= self.longest:
            raise self.wrong(value)
        items = self._items(value)
        if self.distinct:
            self._refuse_repeated(items)
        return items

    def _items(self, value: list[Any]) -> list[Any]:
        """Load every item; after MOST_WRONG wrong ones the rest is not looked at."""
        made: list[Any] = []
        wrong: dict[int, Any] = {}
        for i, item in enumerate(value):
            try:
                made.append(self.inner.deserialize(item))
            except ValidationError as error:
                wrong[i] = error.messages
                if len(wrong) == MOST_WRONG:
                    break
        if wrong:
            raise ValidationError(wrong)
        return made

    @staticmethod
    def _refuse_repeated(items: list[Any]) -> None:
        repeated = {i: [f"{item} stands before; once is enough"] for i, item in enumerate(items) if item in items[:i]}
        if repeated:
            raise ValidationError(repeated)


class Part(Told, fields.Nested):
    """An object with members of its own."""

    right = "write an object"

    def __init__(self, about: str, schema: Any, **options: Any) -> None:
        super().__init__(about, nested=schema, **options)

    def _deserialize(self, value: Any, attr: str | None, data: Any, partial: Any = None, **kwargs: Any) -> Any:
        if not isinstance(value, dict):
            raise self.wrong(value)
        return super()._deserialize(value, attr, data, partial, **kwargs)


class ByName(Told, fields.Dict):
    """An object whose members' names the caller chooses; messages stand under the member's name."""

    right = "write an object, a member for each name"

    def __init__(self, about: str, values: fields.Field[Any], most: int, **options: Any) -> None:
        self.naming, self.most = StrictText("", 1, 100), most
        super().__init__(about, values=values, metadata={"maxProperties": most}, **options)

    def _deserialize(self, value: Any, attr: str | None, data: Any, **kwargs: Any) -> dict[str, Any]:
        if not isinstance(value, dict):
            raise self.wrong(value)
        if len(value) > self.most:
            raise ValidationError(f"found {len(value)} members; write at most {self.most}")
        made, wrong = {}, {}
        for name, item in value.items():
            try:
                self.naming.deserialize(name)
                made[name] = self.value_field.deserialize(item) if self.value_field else item
            except ValidationError as error:
                wrong[name] = error.messages
        if wrong:
            raise ValidationError(wrong)
        return made
