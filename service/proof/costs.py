"""What one step costs on each arc of an item, in the scaled money of a certificate."""

from fractions import Fraction

import numpy as np

from service.network.columns import Network
from service.proof.arc_build import NO_MONEY
from service.proof.arcs import Costs, ItemArcs
from service.proof.exact import Whole, plus, whole, whole_of
from service.proof.money import is_plain, lane_kinds
from service.proof.rulings import measures_on
from service.proof.tariff_lanes import Freights, freights_of, steepest_costs
from service.proof.usable import of_rows


def scaled_costs(network: Network, arcs: ItemArcs, scale: Fraction) -> Costs | None:
    """Return the money of one step on each arc, times ``scale``; None if any is not whole.

    Weights of shortage are not in it.
    """
    price = _plain if is_plain(network) else _charged
    on_lanes = price(network, arcs, scale)
    if on_lanes is None:
        return None
    others = [0] * len(arcs.arcs)
    for position, arc in enumerate(arcs.arcs):
        if arc.money is NO_MONEY:
            continue
        cost = arc.money * scale
        if cost.denominator != 1:
            return None
        others[position] = cost.numerator
    return Costs(on_lanes, whole(others))


def _plain(network: Network, arcs: ItemArcs, scale: Fraction) -> Whole | None:
    """Return the scaled money of a step on each lane, whose rates are all there is to pay."""
    lanes = network.lanes
    measures = measures_on(network, arcs.item, arcs.rows)
    values = of_rows(lanes.unit_cost.values, arcs.rows)
    codes = of_rows(lanes.measure.codes, arcs.rows) if len(measures) > 1 else None
    lane_costs: Whole = np.zeros(0 if codes is None else len(values), dtype=np.int64)
    for code, amount in measures.items():
        ratio = amount * scale / 10**lanes.unit_cost.exponent
        here = slice(None) if codes is None else np.flatnonzero(codes == code)
        part, broken = whole_of(values[here], ratio)
        if broken.any():
            return None
        if codes is None:
            lane_costs = part
            continue
        if part.dtype == object:
            lane_costs = lane_costs.astype(object)
        lane_costs[here] = part
    return lane_costs


def _charged(network: Network, arcs: ItemArcs, scale: Fraction) -> Whole | None:
    """Return the scaled money of a step on each lane: its rate, and its charges; each is whole.

    On a lane with a tariff, whose steps cost different money, it is that of the dearest.
    """
    values = of_rows(network.lanes.unit_cost.values, arcs.rows)
    lane_costs: Whole = np.zeros(len(values), dtype=np.int64)
    for kind in lane_kinds(network, arcs.item, arcs.rows):
        charges = kind.charges * arcs.step * scale
        part, broken = whole_of(values[kind.places], kind.rate * arcs.step * scale)
        if broken.any() or charges.denominator != 1:
            return None
        part = plus(part, whole([charges.numerator]))
        if part.dtype == object:
            lane_costs = lane_costs.astype(object)
        lane_costs[kind.places] = part
    freights = freights_of(network)
    return lane_costs if freights is None else _dearest(network, arcs, scale, lane_costs, freights)


def _dearest(
    network: Network, arcs: ItemArcs, scale: Fraction, lane_costs: Whole, freights: Freights
) -> Whole | None:
    """Return costs with the dearest step of each lane that has a tariff: none costs more."""
    at, steepest = steepest_costs(freights, arcs, network, scale)
    if any(cost.denominator != 1 for cost in steepest):
        return None
    most = whole([cost.numerator for cost in steepest])
    dearest: Whole = np.zeros(len(lane_costs), dtype=most.dtype)
    dearest[at] = most
    return plus(lane_costs, dearest)
