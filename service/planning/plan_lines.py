"""What moves on each lane, and what it costs; the parts add up to the plan's cost exactly."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import NamedTuple

import numpy as np

from service.network.columns import IntArray, Network
from service.network.naming import lane_names
from service.planning.amounts import texts
from service.planning.arcs import Kind, MoneyArray
from service.planning.paths import Paths, paths_of
from service.planning.solve import ItemFlow


class PlanLine(NamedTuple):
    """One item on one lane, or (``lane`` None) served where it lies.

    ``row`` is the lane's row in the network, -1 without a lane. ``steps`` are those of the item;
    money is scaled (``Compiled.cost_scale``), ``rate`` that of one step.
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


def item_plan(network: Network, solved: ItemFlow) -> ItemPlan:
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
        lines=_lines(network, solved, paths, names=names, on_lanes=on_lanes),
    )


def _lines(
    network: Network,
    solved: ItemFlow,
    paths: Paths,
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
        on_lanes.items(),
        strict=True,
    )
    lines = [
        PlanLine(
            row,
            names[lane],
            origin,
            destination,
            steps,
            rate,
            steps * rate,
            drawn.get(lane, 0),
            steps * handling[origin] + used_up.get(lane, 0) * handling[destination],
        )
        for row, origin, destination, rate, (lane, steps) in columns
    ]
    lines += [
        PlanLine(-1, None, site, site, steps, 0, 0, money, steps * handling[site])
        for site, (steps, money) in local.items()
    ]
    return tuple(lines)


def _stock_costs(solved: ItemFlow) -> dict[int, int]:
    """Return the scaled cost of a step by tier: paid where it leaves its shelf, if it has one."""
    return _costs(solved, Kind.SUPPLY) | _costs(solved, Kind.DRAW)


def _handling(solved: ItemFlow) -> dict[int, int]:
    """Return the scaled cost of a step that passes a site, by site."""
    return _costs(solved, Kind.THROUGH)


def _costs(solved: ItemFlow, kind: Kind) -> dict[int, int]:
    """Return the scaled cost of the arcs of one kind by subject."""
    own = solved.own
    arcs = own.of_kind(kind)
    cost: MoneyArray = own.arcs.cost[arcs]
    return dict(zip(own.subject[arcs].tolist(), cost.tolist(), strict=True))


def plan_line_documents(
    network: Network, plans: Sequence[ItemPlan], scale: Fraction
) -> list[dict[str, object]]:
    """Return the table ``plan_lines``, sorted by origin, destination, item and lane."""
    sites = [site.id for site in network.sites]
    keyed: list[tuple[tuple[int, int, int, bytes], dict[str, object]]] = []
    for plan in plans:
        item, lines = network.items[plan.solved.own.item], plan.lines
        money = 1 / scale
        columns = zip(
            lines,
            texts([line.steps for line in lines], item.step),
            texts([line.rate for line in lines], money / item.step),
            texts([line.transport for line in lines], money),
            texts([line.supply for line in lines], money),
            texts([line.handling for line in lines], money),
            texts([line.transport + line.supply + line.handling for line in lines], money),
            strict=True,
        )
        keyed += [
            (
                (line.origin, line.destination, plan.solved.own.item, (line.lane or "").encode()),
                {
                    "lane": line.lane,
                    "origin": sites[line.origin],
                    "destination": sites[line.destination],
                    "item": item.id,
                    "quantity": quantity,
                    "unit_cost": unit_cost,
                    "transport_cost": transport,
                    "supply_cost": supply,
                    "handling_cost": handling,
                    "charges": "0",
                    "cost": cost,
                },
            )
            for line, quantity, unit_cost, transport, supply, handling, cost in columns
        ]
    return [document for _, document in sorted(keyed, key=lambda pair: pair[0])]
