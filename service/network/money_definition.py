"""The parts of a network definition that are about money: exchange rates and freight tariffs."""

from fractions import Fraction
from typing import Annotated, Final

from pydantic import Field

from service.network import kinds
from service.network.definition import (
    Id,
    Name,
    OptionalDate,
    OptionalId,
    OptionalRate,
    Part,
    needed,
    optional,
)
from service.network.kinds import Kind, RefusedError
from service.network.quantities import RATE_DECIMALS_MAX
from service.network.value_schemas import SIGNED_SCHEMA


def _percent_more(value: object) -> Fraction:
    """Read by how many percent something is dearer, or (below 0) cheaper; never free."""
    percent = kinds.as_decimal(value, decimals_max=RATE_DECIMALS_MAX, least=None)
    if percent <= -100:
        raise RefusedError("out_of_range", "Say more than -100 percent.")
    return percent


def _flag(value: object) -> bool:
    """Read true or false."""
    if value is not True and value is not False:
        raise RefusedError("wrong_type", "Send true or false.")
    return value


PERCENT_MORE: Final = Kind(read=_percent_more, schema=SIGNED_SCHEMA)
FLAG: Final = Kind(read=_flag, schema={"type": "boolean"})
BREAK_TYPE: Final = Kind(
    read=kinds.one_of("incremental", "all_units"), schema={"enum": ["incremental", "all_units"]}
)


class ExchangeRatePart(Part):
    """What ``per`` units (1 if absent) of a currency are in the currency of the plan."""

    currency: Annotated[str, *needed(kinds.CURRENCY)] = Field(
        description="ISO 4217.", examples=["NOK"]
    )
    rate: Annotated[Fraction, *needed(kinds.POSITIVE_RATE)] = Field(
        description="Money of the plan's currency for `per` units.", examples=["8.73"]
    )
    per: Annotated[Fraction | None, *optional(kinds.POSITIVE_RATE)] = Field(
        default=None, description="Units of this currency; 1 if absent.", examples=["100"]
    )
    as_of: OptionalDate = Field(
        default=None, description="The day of the rate.", examples=["2026-02-02"]
    )
    source: Name = Field(default=None, description="Who says so.", examples=["central bank"])


class BreakPart(Part):
    """From a quantity on, a rate."""

    start: Annotated[Fraction, *needed(kinds.RATE)] = Field(
        alias="from", description="In the unit of the basis; the first is 0.", examples=["100"]
    )
    rate: Annotated[Fraction, *needed(kinds.RATE)] = Field(
        description="Money per unit of the basis.", examples=["6.25"]
    )


class TariffPart(Part):
    """How a carrier charges one shipment: all goods on one lane on one departure."""

    id: Id
    carrier: OptionalId = None
    currency: Annotated[str | None, *optional(kinds.CURRENCY)] = Field(
        default=None, description="ISO 4217; absent: the plan's.", examples=["NOK"]
    )
    valid_from: OptionalDate = Field(
        default=None, description="The first day of departure.", examples=["2026-01-01"]
    )
    valid_until: OptionalDate = Field(
        default=None, description="The last day of departure.", examples=["2026-12-31"]
    )
    version: Name = Field(default=None, examples=["2026/1"])
    source: Name = Field(default=None, description="Where it stands.", examples=["contract 4711"])
    basis: Id = Field(
        description="unit, weight (kg), volume (m3), chargeable_weight (kg), or a pack: pallet.",
        examples=["chargeable_weight"],
    )
    kg_per_m3: Annotated[Fraction | None, *optional(kinds.POSITIVE_RATE)] = Field(
        default=None,
        description="Kilograms that a cubic metre counts as, at least; for chargeable_weight.",
        examples=["333"],
    )
    breaks: list[BreakPart] = Field(
        description="Rates by quantity, ascending from 0.",
        examples=[[{"from": "0", "rate": "0.4"}, {"from": "1000", "rate": "0.5"}]],
        min_length=1,
        max_length=100,
    )
    break_type: Annotated[str | None, *optional(BREAK_TYPE)] = Field(
        default=None,
        description="incremental: each rate for what lies beyond its break; all_units: that of "
        "the break that is reached for everything. Needed with several breaks.",
        examples=["incremental"],
    )
    pay_up: Annotated[bool | None, *optional(FLAG)] = Field(
        default=None,
        description="all_units: a later break may be paid for in full where that is cheaper.",
        examples=[True],
    )
    minimum_charge: OptionalRate = Field(
        default=None, description="Money that is due at least.", examples=["45"]
    )
    surcharge_percent: Annotated[Fraction | None, *optional(PERCENT_MORE)] = Field(
        default=None, description="Percent on top, also of the minimum.", examples=["12.5"]
    )
    round_up_to: Annotated[Fraction | None, *optional(kinds.POSITIVE_RATE)] = Field(
        default=None,
        description="What is charged is a multiple of this, in the unit of the basis; rounded up "
        "before breaks are looked at.",
        examples=["1"],
    )
    round_money: Annotated[Fraction | None, *optional(kinds.POSITIVE_RATE)] = Field(
        default=None,
        description="The freight is rounded last, to a multiple of this, half upwards.",
        examples=["0.01"],
    )
