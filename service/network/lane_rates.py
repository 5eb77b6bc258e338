"""What a unit of an item costs on each lane: its rate, currency and charges in one column."""

from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from service.network.columns import CodeArray, IntArray, Network
from service.network.money import charged, charges_of, factors
from service.network.units import per_unit


@dataclass(frozen=True, slots=True, kw_only=True)
class LaneRates:
    """Money per item unit: lane r costs ``unit_cost.values[r] * rates[codes[r]]``, and charges.

    The freight of lanes with a tariff is not in it.

    ``codes`` int32 of shape (rows,) tell apart what lanes have in common: measure, currency and
    charges; ``charges[codes[r]]`` is added. None stands for what the item does not say.
    """

    codes: CodeArray
    rates: tuple[Fraction | None, ...]
    charges: tuple[Fraction | None, ...]

    @property
    def with_charges(self) -> bool:
        """Return whether any lane has a charge above 0."""
        return any(self.charges)


def lane_rates(network: Network, item: int, rows: IntArray | slice) -> LaneRates:
    """Return what one unit of ``item`` costs on the lanes at ``rows``."""
    lanes, thing = network.lanes, network.items[item]
    scale = Fraction(1, 10**lanes.unit_cost.exponent)
    measures = [per_unit(thing, measure) for measure in lanes.measure.values]
    if not lanes.currency.values and not lanes.charges.values:
        rates = tuple(None if amount is None else amount * scale for amount in measures)
        return LaneRates(
            codes=lanes.measure.codes[rows], rates=rates, charges=(Fraction(0),) * len(rates)
        )
    keys = np.stack(
        [column.codes[rows] for column in (lanes.measure, lanes.currency, lanes.charges)]
    )
    distinct, codes = np.unique(keys, axis=1, return_inverse=True)
    worth = factors(network.head)
    due = [charged(charges_of(text), thing, worth) for text in lanes.charges.values]
    priced: list[Fraction | None] = []
    charges: list[Fraction | None] = []
    for measure, currency, charge in distinct.T.tolist():
        amount = measures[measure]
        own = None if currency < 0 else lanes.currency.values[currency]
        # A currency without a rate is a fault of its own.
        known = amount is not None and own in worth
        priced.append(amount * scale * worth[own] if known else None)
        charges.append(Fraction(0) if charge < 0 else due[charge])
    return LaneRates(
        codes=codes.ravel().astype(np.int32), rates=tuple(priced), charges=tuple(charges)
    )
