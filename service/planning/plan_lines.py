"""What moves on each lane, and what it costs; the parts add up to the plan's cost exactly."""

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

from service.network.columns import IntArray, Network
from service.network.naming import lane_names
from service.planning.amounts import text
from service.planning.arcs import Kind
from service.planning.paths import Paths, paths_of
from service.planning.solve import ItemFlow


@dataclass(frozen=True, slots=True, kw_only=True)
class PlanLine:
    """One item on one lane, or (``lane`` None) served where it lies; money in plan currency.

    ``row`` is the lane's row in the network, -1 without a lane; ``quantity`` is in item units.
    """

    row: int
    lane: str | None
    origin: int
    destination: int
    item: int
    quantity: Fraction
    unit_cost: Fraction
    transport: Fraction
    supply: Fraction
    handling: Fraction

    @property
    def cost(self) -> Fraction:
        """All of the line's money."""
        return self.transport + self.supply + self.handling


@dataclass(frozen=True, slots=True, kw_only=True)
class ItemPlan:
    """The plan of one item before it is shared out: its flow, paths, lane names and plan lines.

    ``names`` are those of the lanes in use, by position in ``LaneBounds.rows``.
    """

    solved: ItemFlow
    paths: Paths
    names: Mapping[int, str]
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
    thing = network.items[own.item]
    drawn: dict[int, Fraction] = {}
    used_up: dict[int, int] = {}
    local: dict[int, list[Fraction]] = {}
    for path in paths.paths:
        money = path.steps * own.stock.money.fraction(int(own.stock.row_tier[path.row]))
        if path.legs:
            drawn[path.legs[0]] = drawn.get(path.legs[0], Fraction(0)) + money
            used_up[path.legs[-1]] = used_up.get(path.legs[-1], 0) + path.steps
        else:
            sums = local.setdefault(path.site, [Fraction(0), Fraction(0)])
            sums[0] += path.steps * thing.step
            sums[1] += money
    lines = []
    for lane, steps in on_lanes.items():
        row = int(own.lanes.rows[lane])
        origin, destination = int(network.lanes.origin[row]), int(network.lanes.destination[row])
        money = own.lanes.money.fraction(lane)
        lines.append(
            PlanLine(
                row=row,
                lane=names[lane],
                origin=origin,
                destination=destination,
                item=own.item,
                quantity=steps * thing.step,
                unit_cost=money / thing.step,
                transport=steps * money,
                supply=drawn.get(lane, Fraction(0)),
                handling=thing.step
                * (
                    steps * network.sites[origin].handling(thing.id)
                    + used_up.get(lane, 0) * network.sites[destination].handling(thing.id)
                ),
            )
        )
    lines.extend(
        PlanLine(
            row=-1,
            lane=None,
            origin=site,
            destination=site,
            item=own.item,
            quantity=quantity,
            unit_cost=Fraction(0),
            transport=Fraction(0),
            supply=money,
            handling=quantity * network.sites[site].handling(thing.id),
        )
        for site, (quantity, money) in local.items()
    )
    return tuple(lines)


def plan_line_documents(network: Network, lines: list[PlanLine]) -> list[dict[str, object]]:
    """Return the table ``plan_lines``, sorted by origin, destination, item and lane."""
    lines = sorted(
        lines,
        key=lambda line: (line.origin, line.destination, line.item, (line.lane or "").encode()),
    )
    return [
        {
            "lane": line.lane,
            "origin": network.sites[line.origin].id,
            "destination": network.sites[line.destination].id,
            "item": network.items[line.item].id,
            "quantity": text(line.quantity),
            "unit_cost": text(line.unit_cost),
            "transport_cost": text(line.transport),
            "supply_cost": text(line.supply),
            "handling_cost": text(line.handling),
            "charges": "0",
            "cost": text(line.cost),
        }
        for line in lines
    ]
