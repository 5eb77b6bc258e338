"""Networks for tests, built from tables, and one way to run any of them through the real pipeline.

Nothing is faked here: bytes go in at the intake, the normal form is planned from its file, and the
proof's own code checks what comes out, as in a run of the service.
"""

import tempfile
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from pathlib import Path
from typing import Any

import orjson

from service.network.canonical import read_network
from service.network.columns import Network
from service.network.intake import IntakeReport, Limits, intake
from service.network.options import Options, read_options
from service.planning.outcome import Outcome
from service.planning.task import plan
from service.proof.check import Violation, check

Amount = int | str
Arc = tuple[str, str, Amount, Amount | None]
Document = dict[str, Any]

CUT_OFF = "2026-02-03T16:00:00+01:00"


@dataclass(frozen=True, slots=True, kw_only=True)
class Planned:
    """What came of one network: documents as read back, and what the checker found."""

    plan: Mapping[str, Any]
    certificate: Mapping[str, Any]
    outcome: Outcome
    violations: tuple[Violation, ...]
    plan_bytes: bytes
    network_digest: str
    network: Network
    options: Options

    @property
    def total_cost(self) -> Fraction:
        """The total of the plan, exactly."""
        return Fraction(self.plan["total_cost"])

    @property
    def gap(self) -> Fraction:
        """What the certificate leaves open between the plan and any better one."""
        return Fraction(self.certificate["gap"])

    def shipped(self) -> dict[str, Fraction]:
        """Return the quantity on every lane that is used, by the lane's name and item."""
        return {
            f"{line['lane']} {line['item']}": Fraction(line["quantity"])
            for line in self.plan["plan_lines"]
            if line["lane"] is not None
        }

    def moves(self) -> dict[tuple[str, str], Fraction]:
        """Return the quantity between every two sites that ship, over all lanes and items."""
        moves: dict[tuple[str, str], Fraction] = {}
        for line in self.plan["plan_lines"]:
            if line["lane"] is not None:
                ends = (line["origin"], line["destination"])
                moves[ends] = moves.get(ends, Fraction(0)) + Fraction(line["quantity"])
        return moves

    def short(self) -> Fraction:
        """Return all that is short, over all lines and kept stock."""
        return sum((Fraction(row["quantity"]) for row in self.plan["shortages"]), Fraction(0))


class NetworkRefused(Exception):  # noqa: N818 - a refusal is an answer of the door, no error of ours
    """The intake found faults; ``report`` has them."""

    def __init__(self, report: IntakeReport) -> None:
        """Keep the report and show its faults."""
        super().__init__([(fault.pointer, fault.code, fault.value) for fault in report.faults])
        self.report = report


def take_in(body: bytes, folder: Path, options: Options) -> IntakeReport:
    """Check ``body`` as the intake child does, writing what it writes into ``folder``."""
    spool = folder / "spool"
    spool.write_bytes(body)
    return intake(
        spool,
        folder,
        options=options,
        media_type="application/json",
        content_encoding=None,
        limits=Limits(),
    )


def plan_network(document: Mapping[str, Any], **options: str) -> Planned:
    """Run ``document`` through intake, planning and proof.

    ``options`` are given as in a query. Raises ``NetworkRefused`` where the intake finds faults and
    fails the test where the run fails or the checker, asked once more here, finds a violation: a
    plan that is returned is proved, and so is the reason of one that cannot be.
    """
    return plan_bytes(orjson.dumps(document), **options)


def plan_bytes(body: bytes, **options: str) -> Planned:
    """Do the same with a body as it is sent."""
    effective, faults = read_options(options)
    assert effective is not None, faults
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        report = take_in(body, folder, effective)
        if report.status != "accepted":
            raise NetworkRefused(report)
        assert report.summary is not None, "an accepted network has a summary"
        results = folder / "results"
        results.mkdir()
        outcome = plan(folder, effective, results)
        assert outcome.state in {"planned", "no_plan"}, outcome
        network = read_network(folder / "network.zip")
        written = (results / "plan.json").read_bytes()
        certificate = orjson.loads((results / "certificate.json").read_bytes())
    violations = check(network, effective, orjson.loads(written), certificate)
    assert violations == (), violations
    return Planned(
        plan=orjson.loads(written),
        certificate=certificate,
        outcome=outcome,
        violations=violations,
        plan_bytes=written,
        network_digest=str(report.summary["network_digest"]),
        network=network,
        options=effective,
    )


def network_document(  # noqa: PLR0913 - one argument for each table of a network
    *,
    items: Sequence[Mapping[str, Any]] = ({"id": "GOODS", "unit": "unit"},),
    sites: Sequence[Mapping[str, Any]],
    supply: Sequence[Mapping[str, Any]],
    demand: Sequence[Mapping[str, Any]],
    lanes: Sequence[Mapping[str, Any]],
    rules: Sequence[Mapping[str, Any]] = (),
    currency: str = "USD",
) -> Document:
    """Return a whole network definition from its tables."""
    return {
        "format": 1,
        "currency": currency,
        "cut_off": CUT_OFF,
        "items": [dict(row) for row in items],
        "sites": [dict(row) for row in sites],
        "supply": [dict(row) for row in supply],
        "demand": [dict(row) for row in demand],
        "lanes": [dict(row) for row in lanes],
        "rules": [dict(row) for row in rules],
    }


def transportation_network(
    supply: Mapping[str, Amount],
    demand: Mapping[str, Amount],
    unit_cost: Mapping[str, Mapping[str, Amount]],
) -> Document:
    """Return the classical problem: sources, sinks and a cost for each pair that has a lane."""
    lanes: list[Arc] = [
        (origin, destination, cost, None)
        for origin, row in unit_cost.items()
        for destination, cost in row.items()
    ]
    return flow_network(supply, demand, lanes)


def cost_table(
    origins: Sequence[str], destinations: Sequence[str], rows: Sequence[Sequence[Amount]]
) -> dict[str, dict[str, Amount]]:
    """Return a printed cost table as costs by origin and destination."""
    return {
        origin: dict(zip(destinations, row, strict=True))
        for origin, row in zip(origins, rows, strict=True)
    }


def flow_network(
    supply: Mapping[str, Amount],
    demand: Mapping[str, Amount],
    arcs: Sequence[Arc],
    *,
    all_supply_leaves: bool = False,
) -> Document:
    """Return a network of nodes and arcs (from, to, cost, capacity or None) of one good.

    Every node gets the roles that its arcs need: what it has makes it a warehouse, what it wants a
    ship-to, and a node that goods can only pass is a cross-dock. ``all_supply_leaves`` makes each
    source draw all it has: its stock lies one forced lane in front of it.
    """
    sites: dict[str, set[str]] = {}
    for node in supply:
        sites.setdefault(node, set()).add("cross_dock" if all_supply_leaves else "warehouse")
    for node in demand:
        sites.setdefault(node, set()).add("ship_to")
    starts, ends = {arc[0] for arc in arcs}, {arc[1] for arc in arcs}
    for node in starts | ends:
        roles = sites.setdefault(node, set())
        passed = node in starts and node in ends
        if passed or (node in starts and node not in supply) or not roles:
            roles.add("cross_dock")
        if node in ends and node not in demand:
            roles.add("cross_dock")
    stock_of = {node: f"stock of {node}" if all_supply_leaves else node for node in supply}
    if all_supply_leaves:
        sites |= {place: {"warehouse"} for place in stock_of.values()}
    lanes = [
        {"id": f"{number}", "origin": start, "destination": end, "unit_cost": str(cost)}
        | ({} if capacity is None else {"capacity": str(capacity)})
        for number, (start, end, cost, capacity) in enumerate(arcs, start=1)
    ]
    if all_supply_leaves:
        lanes += [
            {
                "id": f"all of {node}",
                "origin": stock_of[node],
                "destination": node,
                "unit_cost": "0",
                "must_ship": str(quantity),
            }
            for node, quantity in supply.items()
        ]
    return network_document(
        sites=[{"id": node, "roles": sorted(roles)} for node, roles in sites.items()],
        supply=[
            {"site": stock_of[node], "item": "GOODS", "quantity": str(quantity)}
            for node, quantity in supply.items()
        ],
        demand=[
            {"reference": node, "site": node, "item": "GOODS", "quantity": str(quantity)}
            for node, quantity in demand.items()
        ],
        lanes=lanes,
    )
