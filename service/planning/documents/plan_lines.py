"""What moves on each lane, and what it costs; the parts add up to the plan's cost exactly."""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import NamedTuple

import numpy as np

from service.network.columns import IntArray, Network
from service.network.days import day_text
from service.network.naming import lane_names
from service.planning.documents.amounts import texts
from service.planning.documents.paths import Paths, paths_of
from service.planning.documents.shipments import Shipments
from service.planning.model.arcs import Kind, MoneyArray
from service.planning.solve import ItemFlow

Completing = Callable[["ItemPlan", Mapping["PlanLine", dict[str, object]]], None]


class PlanLine(NamedTuple):
    """One item on one lane, or (``lane`` None) served where it lies.

    ``row`` is the lane's row in the network, -1 without a lane. ``steps`` are those of the item;
    money is scaled (``Compiled.cost_scale``), ``rate`` the transport of one step (0 on a lane with
    a tariff, on which steps cost different money). ``departs`` and ``arrives`` are days, 0 where
    there are none.
    """

    row: int
    lane: str | None
    origin: int
    destination: int
    steps: int
    rate: int
    transport: int
    supply: int
    handling: int
    charges: int
    departs: int = 0
    arrives: int = 0

    @property
    def cost(self) -> int:
        """Return all that it costs."""
        return self.transport + self.supply + self.handling + self.charges

    def dates(self) -> dict[str, object]:
        """Return both dates as they are shown; goods that are used where they lie have none."""
        if not self.departs:
            return {"departs": None, "arrives": None}
        return {"departs": day_text(self.departs), "arrives": day_text(self.arrives)}


@dataclass(frozen=True, slots=True, kw_only=True)
class ItemPlan:
    """The plan of one item before it is shared out: its flow, paths, lane names and plan lines.

    ``names`` are those of the lanes in use, by position in ``LaneBounds.rows``, ``rows`` their
    rows in the network.
    """

    solved: ItemFlow
    paths: Paths
    names: Mapping[int, str]
    rows: Mapping[int, int]
    lines: tuple[PlanLine, ...]

    def name_bytes(self) -> dict[int, bytes]:
        """Return the names as bytes, in whose order lanes are sorted."""
        return {lane: name.encode() for lane, name in self.names.items()}


def item_plan(network: Network, solved: ItemFlow, scale: Fraction) -> ItemPlan:
    """Cut the flow of one item into paths and price it lane by lane."""
    own = solved.own
    on_lanes = solved.amounts(Kind.LANE)
    positions = list(on_lanes)
    rows: IntArray = own.lanes.rows[positions] if positions else own.lanes.rows[:0]
    names = dict(zip(positions, lane_names(network, rows), strict=True))
    paths = paths_of(solved, lane_key=lambda lanes: [names[lane].encode() for lane in lanes])
    return ItemPlan(
        solved=solved,
        paths=paths,
        names=names,
        rows=dict(zip(positions, rows.tolist(), strict=True)),
        lines=_lines(network, solved, paths, scale, names=names, on_lanes=on_lanes),
    )


def _lines(  # noqa: PLR0913 - what a line says comes from all of these
    network: Network,
    solved: ItemFlow,
    paths: Paths,
    scale: Fraction,
    *,
    names: Mapping[int, str],
    on_lanes: Mapping[int, int],
) -> tuple[PlanLine, ...]:
    """Return the plan lines of one item.

    Stock is paid on the first leg of its path, handling at a lane's origin on that lane, handling
    at a destination on the lane whose goods are used up there.
    """
    own = solved.own
    of_tier, handling = _stock_costs(solved), _handling(solved)
    tier_of = own.stock.row_tier.tolist()
    drawn: dict[int, int] = {}
    used_up: dict[int, int] = {}
    local: dict[int, tuple[int, int]] = {}
    for path in paths.paths:
        money = path.steps * of_tier[tier_of[path.row]]
        if path.legs:
            drawn[path.legs[0]] = drawn.get(path.legs[0], 0) + money
            used_up[path.legs[-1]] = used_up.get(path.legs[-1], 0) + path.steps
        else:
            steps, paid = local.get(path.site, (0, 0))
            local[path.site] = (steps + path.steps, paid + money)
    lanes = np.array(list(on_lanes), np.int64)
    rows = own.lanes.rows[lanes]
    columns = zip(
        rows.tolist(),
        network.lanes.origin[rows].tolist(),
        network.lanes.destination[rows].tolist(),
        own.arcs.cost[lanes].tolist(),
        _charges(solved, lanes, scale),
        on_lanes.items(),
        *(
            [0] * len(rows) if days is None else days[lanes].tolist()
            for days in (own.lanes.departs, own.lanes.arrives)
        ),
        strict=True,
    )
    lines = [
        PlanLine(
            row,
            names[lane],
            origin,
            destination,
            steps,
            rate - charge,
            steps * (rate - charge),
            drawn.get(lane, 0),
            steps * handling[origin] + used_up.get(lane, 0) * handling[destination],
            steps * charge,
            departs,
            arrives,
        )
        for row, origin, destination, rate, charge, (lane, steps), departs, arrives in columns
    ]
    if network.lanes.tariff.values:
        shipments = Shipments(network)
        lines = [_shipped(shipments, line, own.item, scale) for line in lines]
    lines += [
        PlanLine(-1, None, site, site, steps, 0, 0, money, steps * handling[site], 0)
        for site, (steps, money) in local.items()
    ]
    return tuple(lines)


def _shipped(shipments: Shipments, line: PlanLine, item: int, scale: Fraction) -> PlanLine:
    """Return a line with the freight that its tariff asks for, if its lane has one."""
    tariff = shipments.tariff(line.row, line.departs)
    if tariff is None:
        return line
    money = shipments.in_plan_money(tariff, shipments.money(tariff, item, line.steps)) * scale
    # The scale makes every further step whole, and the first of them starts from nothing.
    assert money.denominator == 1  # noqa: S101 - see above
    return line._replace(rate=0, transport=money.numerator)


def _charges(solved: ItemFlow, lanes: IntArray, scale: Fraction) -> list[int]:
    """Return the scaled charges of a step on each of ``lanes``, by position."""
    charges = solved.own.lanes.charges
    if charges is None:
        return [0] * lanes.shape[0]
    scaled: list[int] = charges.at(lanes).times(scale).on(Fraction(1)).tolist()
    return scaled


def _stock_costs(solved: ItemFlow) -> dict[int, int]:
    """Return the scaled cost of a step by tier: paid where it leaves its shelf, if it has one."""
    return _costs(solved, Kind.SUPPLY) | _costs(solved, Kind.DRAW)


def _handling(solved: ItemFlow) -> dict[int, int]:
    """Return the scaled cost of a step that passes a site, by site."""
    site_of = solved.own.layout.places.site
    return {int(site_of[place]): cost for place, cost in _costs(solved, Kind.THROUGH).items()}


def _costs(solved: ItemFlow, kind: Kind) -> dict[int, int]:
    """Return the scaled cost of the arcs of one kind by subject."""
    own = solved.own
    arcs = own.of_kind(kind)
    cost: MoneyArray = own.arcs.cost[arcs]
    return dict(zip(own.subject[arcs].tolist(), cost.tolist(), strict=True))


def plan_line_documents(
    network: Network, plans: Sequence[ItemPlan], scale: Fraction, *, complete: Completing | None
) -> list[dict[str, object]]:
    """Return the table ``plan_lines``, sorted by origin, destination, item, departure, lane.

    ``complete`` adds to the lines of one item what only some networks have.
    """
    sites = [site.id for site in network.sites]
    keyed: list[tuple[tuple[int, int, int, int, bytes], dict[str, object]]] = []
    for plan in plans:
        item, lines = network.items[plan.solved.own.item], plan.lines
        money, dated = 1 / scale, plan.solved.own.layout.places.day is not None
        columns = zip(
            lines,
            texts([line.steps for line in lines], item.step),
            texts([line.rate for line in lines], money / item.step),
            texts([line.transport for line in lines], money),
            texts([line.supply for line in lines], money),
            texts([line.handling for line in lines], money),
            texts([line.charges for line in lines], money),
            texts([line.cost for line in lines], money),
            strict=True,
        )
        own = [
            (
                line,
                (
                    line.origin,
                    line.destination,
                    plan.solved.own.item,
                    line.departs,
                    (line.lane or "").encode(),
                ),
                {
                    "lane": line.lane,
                    "origin": sites[line.origin],
                    "destination": sites[line.destination],
                    "item": item.id,
                    "quantity": quantity,
                    **(line.dates() if dated else {}),
                    "unit_cost": unit_cost,
                    "transport_cost": transport,
                    "supply_cost": supply,
                    "handling_cost": handling,
                    "charges": charges,
                    "cost": cost,
                },
            )
            for line, quantity, unit_cost, transport, supply, handling, charges, cost in columns
        ]
        if complete is not None:
            complete(plan, {line: document for line, _, document in own})
        keyed += [(key, document) for _, key, document in own]
    return [document for _, document in sorted(keyed, key=lambda pair: pair[0])]
