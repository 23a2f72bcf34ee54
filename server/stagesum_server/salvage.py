"""From a body to the model, with all faults at once: those of form and, where it can be told, those of meaning.

Faults of form normally hide those of meaning, because nothing can be built. Where they lie only inside single sources
or in optional members, the rest is still worth examining: each faulty source is replaced by a harmless one of its name,
each faulty optional member is left out, and intake looks at what remains.
"""

from __future__ import annotations

from itertools import accumulate
from typing import TYPE_CHECKING, Any

from marshmallow import ValidationError
from stagesum_schemas.budget import BudgetRequestSchema
from stagesum_schemas.fields import found
from stagesum_schemas.pointers import faults as faults_of
from stagesum_schemas.pointers import in_body_order, member
from stagesum_schemas.records import Fault

from stagesum_server import intake
from stagesum_server.intake import InvalidRequest

if TYPE_CHECKING:
    from stagesum_server.engine.chain import Model
    from stagesum_server.limits import Limits

SCHEMA = BudgetRequestSchema()
NEEDED = ("input", "stages", "conditions")  # nothing can be said about a chain where one of these has a fault
# a limit's unit is that of the node referred to; without the one the other can't be judged
GO_TOGETHER = {"refer_to": ("refer_to", "limit")}
UNNAMED = "\ue000"  # begins a placeholder's name where the source's own is faulty: a letter that no sound name has


def build(body: Any, limits: Limits) -> Model:
    """Build the model of a body.

    Raises
    ------
    InvalidRequest
        With every fault of form, and every fault of meaning of what is left without the faulty places; in the order
        of the body.

    """
    try:
        return _build(body, limits)
    except InvalidRequest as error:
        raise InvalidRequest(in_body_order(error.faults, body)) from None


def _build(body: Any, limits: Limits) -> Model:
    if not isinstance(body, dict):
        raise InvalidRequest((Fault("#", f"found {found(body)}; write an object, see /openapi.json"),))
    _refuse_sizes(body, limits)
    try:
        request = SCHEMA.load(body)
    except ValidationError as error:
        form = faults_of(error.messages, body)
        raise InvalidRequest(form + _meaning(body, error.messages, limits)) from None
    return intake.build(request, limits)


def _refuse_sizes(body: dict[str, Any], limits: Limits) -> None:
    """Refuse at once what would take long only to be looked at."""
    stages = body.get("stages")
    stages = stages if isinstance(stages, list) else []
    listed = [stage.get("sources") for stage in stages if isinstance(stage, dict)]
    sources = sum(len(some) for some in listed if isinstance(some, list))
    for what, count, most in (("stages", len(stages), limits.max_stages), ("sources", sources, limits.max_sources)):
        if count > most:
            raise InvalidRequest((Fault("#/stages", f"found {count} {what}; at most {most} are computed"),))


def _meaning(body: dict[str, Any], messages: Any, limits: Limits) -> tuple[Fault, ...]:
    """Faults of meaning of the body without its faulty places."""
    rest = _without(body, messages)
    if rest is None:
        return ()
    sound, replaced = rest
    try:
        intake.build(SCHEMA.load(sound), limits)
    except InvalidRequest as error:
        return tuple(fault for fault in error.faults if not _inside(fault.pointer, replaced))
    except ValidationError:  # a placeholder met a fault of its own, such as a name that is used twice
        return ()
    return ()


def _inside(pointer: str, places: set[str]) -> bool:
    """Whether a place or one that it is part of is among ``places``."""
    return any(prefix in places for prefix in accumulate(pointer.split("/"), "{}/{}".format))


def _without(body: dict[str, Any], messages: dict[str, Any]) -> tuple[dict[str, Any], set[str]] | None:
    """The body with faulty places replaced or left out, and those places; None where too much is faulty."""
    sources = _faulty_sources(messages.get("stages", {}))
    if sources is None or any(name not in body or name in NEEDED for name in messages if name != "stages"):
        return None
    dropped = {gone for name in messages if name != "stages" for gone in GO_TOGETHER.get(name, (name,))}
    if any(_unknown_to_correlations(wrong) for wrong in sources.values()):
        dropped.add("correlations")
    sound = {name: value for name, value in body.items() if name not in dropped}
    sound["stages"] = _with_placeholders(body["stages"], sources)
    places = {f"#/{member(name)}" for name in dropped} | {f"#/stages/{i}/sources/{j}" for i, j in sources}
    return sound, places


def _unknown_to_correlations(wrong: Any) -> bool:
    """Whether a faulty source can't be found by its name, or not be paired since it isn't known how it varies."""
    return not isinstance(wrong, dict) or bool({"name", "varies_by"} & set(wrong))


def _faulty_sources(messages: Any) -> dict[tuple[int, int], Any] | None:
    """Messages of each faulty source by its place; None where something else of a stage is faulty."""
    found: dict[tuple[int, int], Any] = {}
    if not isinstance(messages, dict):
        return None
    for i, stage in messages.items():
        if not isinstance(stage, dict) or set(stage) != {"sources"} or not isinstance(stage["sources"], dict):
            return None
        found |= {(i, j): wrong for j, wrong in stage["sources"].items()}
    return found


def _with_placeholders(stages: list[Any], faulty: dict[tuple[int, int], Any]) -> list[Any]:
    made = list(stages)
    for (i, j), wrong in faulty.items():
        if made[i] is stages[i]:
            made[i] = {**stages[i], "sources": list(stages[i]["sources"])}
        made[i]["sources"][j] = _placeholder(stages[i]["sources"][j], wrong, f"{UNNAMED}{j}")
    return made


def _placeholder(source: Any, wrong: Any, name: str) -> dict[str, Any]:
    """A source that no check objects to, of the same name and kind of variation where these are sound."""
    kept = {}
    if isinstance(source, dict) and isinstance(wrong, dict):
        kept = {key: source[key] for key in ("name", "varies_by") if key in source and key not in wrong}
    return {"name": name, **kept, "effect": "gain", "max": 1e-9}
