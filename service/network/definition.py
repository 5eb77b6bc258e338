"""The small parts of a network definition: head, items, sites, rules, control totals.

The three big tables are read by ``network/tables.py``; their fields stand in
``network/table_fields.py``. Together with these models they make the JSON Schema of the network
(``network/schema.py``). Here, and nowhere else in ``network``, pydantic is used.
"""

from collections.abc import Callable, Mapping
from datetime import date
from fractions import Fraction
from typing import Annotated, Any, Final, Self, TypeVar

from pydantic import (
    BaseModel,
    ConfigDict,
    Field,
    PlainValidator,
    ValidationError,
    WithJsonSchema,
    model_validator,
)
from pydantic_core import PydanticCustomError

from service.network import kinds
from service.network.faults import FaultList, Odd, pointer, value_text
from service.network.kinds import Kind, RefusedError
from service.network.moments import Instant
from service.network.sheets import refuse_field


def _read(kind: Kind, *, optional: bool) -> Callable[[object], Any]:
    """Return the reader of a kind; null stands for absent where the field is ``optional``."""

    def read(value: object) -> Any:  # noqa: ANN401 - the field's own type says what comes out
        if optional and value is None:
            return None
        if isinstance(value, Odd):
            raise PydanticCustomError(value.code, value.detail)
        try:
            return kind.read(value)
        except RefusedError as error:
            raise PydanticCustomError(error.code, error.detail) from None

    return read


def needed(kind: Kind) -> tuple[Any, Any]:
    """Return the annotations of a field that must be there."""
    return PlainValidator(_read(kind, optional=False)), WithJsonSchema(kind.schema)


def optional(kind: Kind) -> tuple[Any, Any]:
    """Return the annotations of a field that may be absent or null."""
    schema = {"anyOf": [*kind.schema.get("anyOf", [kind.schema]), {"type": "null"}]}
    return PlainValidator(_read(kind, optional=True)), WithJsonSchema(schema)


Id = Annotated[str, *needed(kinds.ID)]
OptionalId = Annotated[str | None, *optional(kinds.ID)]
Name = Annotated[str | None, *optional(kinds.NAME)]
Note = Annotated[str | None, *optional(kinds.NOTE)]
Tags = Annotated[tuple[str, ...] | None, *optional(kinds.TAGS)]
Extra = Annotated[Mapping[str, str] | None, *optional(kinds.EXTRA)]
OptionalMoment = Annotated[Instant | None, *optional(kinds.INSTANT)]
OptionalDate = Annotated[date | None, *optional(kinds.DATE)]
OptionalRate = Annotated[Fraction | None, *optional(kinds.RATE)]
Quantity = Annotated[Fraction, *needed(kinds.QUANTITY)]
OptionalQuantity = Annotated[Fraction | None, *optional(kinds.QUANTITY)]
OptionalCount = Annotated[int | None, *optional(kinds.COUNT)]
Picks = Annotated[tuple[str, ...] | None, *optional(kinds.PICKS)]
PicksLanes = Annotated[tuple[str, ...] | None, *optional(kinds.PICKS_LANES)]
PicksRoles = Annotated[tuple[str, ...] | None, *optional(kinds.ROLE_LIST)]


class Part(BaseModel):
    """A part of a definition: unknown fields are faults, nothing changes after reading."""

    model_config = ConfigDict(extra="forbid", frozen=True)


class StoragePart(Part):
    """A cross-dock at which goods of one item, or of all, may stay overnight."""

    site: Id = Field(description="A cross-dock.", examples=["HUB"])
    item: OptionalId = Field(
        default=None, description="Goods of this item; of all if absent.", examples=["0025"]
    )


class Head(Part):
    """What a network says of itself beside its tables."""

    format: Annotated[int, *needed(kinds.FORMAT)]
    name: Name = None
    currency: Annotated[str, *needed(kinds.CURRENCY)]
    cut_off: Annotated[Instant, *needed(kinds.INSTANT)]
    planned_at: OptionalMoment = Field(
        default=None,
        description="When the plan is made; what closed before is left out. cut_off if absent.",
        examples=["2026-02-03T16:05:00+01:00"],
    )
    release_by: OptionalMoment = None
    periods: Annotated[tuple[date, ...] | None, *optional(kinds.DATES)] = Field(
        default=None,
        description="The dates on which goods may leave; that of the cut-off alone if absent.",
        examples=[["2026-02-03", "2026-02-04", "2026-02-05"]],
    )
    shortage_measure: OptionalId = None
    storage: list[StoragePart] | None = Field(
        default=None,
        description="Where goods that arrive may stay overnight, free of charge; else nowhere.",
    )
    extra: Extra = None


class PackPart(Part):
    """A trade pack of an item."""

    unit: Id
    contains: Annotated[Fraction, *needed(kinds.POSITIVE)]


class ItemPart(Part):
    """What is moved."""

    id: Id
    unit: Id
    name: Name = None
    step: Annotated[Fraction | None, *optional(kinds.POSITIVE)] = None
    gtin: Annotated[str | None, *optional(kinds.GTIN)] = None
    weight_kg: OptionalRate = None
    volume_m3: OptionalRate = None
    value: OptionalRate = Field(
        default=None,
        description="What one unit is worth, in the currency of the plan.",
        examples=["8.50"],
    )
    packs: list[PackPart] | None = None
    tags: Tags = None
    extra: Extra = None


class SitePart(Part):
    """A place."""

    id: Id
    roles: Annotated[tuple[str, ...], *needed(kinds.ROLE_LIST)]
    name: Name = None
    gln: Annotated[str | None, *optional(kinds.GLN)] = None
    latitude: Annotated[Fraction | None, *optional(kinds.LATITUDE)] = None
    longitude: Annotated[Fraction | None, *optional(kinds.LONGITUDE)] = None
    time_zone: Annotated[str | None, *optional(kinds.ZONE)] = None
    country: Annotated[str | None, *optional(kinds.COUNTRY)] = None
    handling_cost: Annotated[Mapping[str, Fraction] | None, *optional(kinds.HANDLING_COST)] = None
    tags: Tags = None
    extra: Extra = None


class LanePick(Part):
    """Picks lanes."""

    ids: PicksLanes = None
    origin: Picks = None
    destination: Picks = None
    carrier: Picks = None
    tag: Picks = None


class SitePick(Part):
    """Picks sites."""

    ids: Picks = None
    role: PicksRoles = None
    tag: Picks = None


class ItemPick(Part):
    """Picks items."""

    ids: Picks = None
    tag: Picks = None


class RulePart(Part):
    """What every rule says."""

    rule: Id
    id: Id
    note: Note = None
    owner: Name = None
    starts: OptionalDate = Field(default=None, alias="from")
    until: OptionalDate = None
    items: ItemPick | None = None

    @model_validator(mode="after")
    def _period_runs_forward(self) -> Self:
        """Refuse a period that ends before it begins."""
        if self.starts is not None and self.until is not None and self.until < self.starts:
            raise PydanticCustomError(
                "period_reversed", "The rule ends (until) before it begins (from)."
            )
        return self


class ClosurePart(RulePart):
    """Nothing moves on some lanes, or over some sites."""

    lanes: LanePick | None = None
    sites: SitePick | None = None

    @model_validator(mode="after")
    def _lanes_or_sites(self) -> Self:
        """Refuse a closure of both or of nothing: what is meant would be a guess."""
        if (self.lanes is None) == (self.sites is None):
            raise PydanticCustomError("lanes_or_sites", "A closure names either lanes or sites.")
        return self


class FixedQuantityPart(RulePart):
    """A lane moves exactly so much."""

    lanes: LanePick
    quantity: Quantity


class ThroughputPart(RulePart):
    """A site handles at most so much."""

    sites: SitePick
    flow: Annotated[str, *needed(kinds.FLOW)]
    measure: OptionalId = None
    maximum: Quantity
    per: Annotated[str | None, *optional(kinds.PER)] = None


class SharedCapacityPart(RulePart):
    """Lanes carry at most so much of all items."""

    lanes: LanePick
    measure: OptionalId = None
    maximum: Quantity
    per: Annotated[str | None, *optional(kinds.PER)] = None


class Control(Part):
    """Totals that the sender counted itself, to notice rows that were lost on the way."""

    demand_rows: OptionalCount = None
    demand_quantity: OptionalQuantity = None
    supply_rows: OptionalCount = None
    supply_quantity: OptionalQuantity = None
    lane_rows: OptionalCount = None
    extract_id: OptionalId = None
    extracted_at: OptionalMoment = None


RULE_PARTS: Final[Mapping[str, type[RulePart]]] = {
    "closure": ClosurePart,
    "fixed_quantity": FixedQuantityPart,
    "throughput": ThroughputPart,
    "shared_capacity": SharedCapacityPart,
}

_Part = TypeVar("_Part", bound=Part)


def validated(
    part: type[_Part], value: object, *, path: tuple[str | int, ...], table: str, faults: FaultList
) -> _Part | None:
    """Return ``value`` as a ``part``, or None after reporting everything that is wrong with it.

    ``path`` is where it stands in the body; ``table`` the name of the list that its fields are in.
    """
    try:
        return part.model_validate(value)
    except ValidationError as error:
        for flaw in error.errors(include_url=False, include_context=False):
            _report(flaw, path=path, table=table, faults=faults)
        return None


def _report(
    flaw: Mapping[str, Any], *, path: tuple[str | int, ...], table: str, faults: FaultList
) -> None:
    """Report one flaw that pydantic found, in our words."""
    place = pointer(*path, *flaw["loc"])
    kind: str = flaw["type"]
    if kind == "extra_forbidden":
        # A part inside a part has fields of its own: they are not those of the table.
        where = table if len(flaw["loc"]) == 1 else "this object"
        refuse_field(where, str(flaw["loc"][-1]), place, faults)
    elif kind == "missing":
        faults.add(place, "missing_field", f"'{flaw['loc'][-1]}' is needed here.")
    elif kind in _OWN_WORDS:
        faults.add(place, "wrong_type", _OWN_WORDS[kind], value_text(flaw["input"]))
    else:
        faults.add(place, kind, flaw["msg"], value_text(flaw["input"]))


_OWN_WORDS: Final[Mapping[str, str]] = {
    "too_short": "Send at least one.",
    "too_long": "Send fewer.",
    "model_type": "Send an object.",
    "list_type": "Send an array.",
}
