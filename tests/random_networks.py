"""Random networks that are feasible because a witness flow was drawn first.

Goods walk from stock to demand along open lanes; supply, demand, capacities, must-ships, fixed
quantities, throughput limits and kept stock are then chosen so that those walks fit. Only what
is scarce on purpose (more wanted than walked) can be short, and no forced quantity ever fails.
Every choice is made by one ``random.Random``, which may be Hypothesis's own, so that it shrinks.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import ceil
from random import Random
from typing import Any

from tests.factories import Document, network_document
from tests.oracle_reading import read_items
from tests.random_witness import MARKS, Witness, plain_text

PRIORITIES = (1, 2, 3, 5, 9)


@dataclass(frozen=True, slots=True, kw_only=True)
class RandomNetwork:
    """A drawn network: the document, the options to plan it with, and whether it may be short."""

    document: Document
    options: dict[str, str]
    scarce: bool


def draw_network(rng: Random, *, sites: int = 4, walks: int = 5) -> RandomNetwork:
    """Draw one network; ``sites`` of each kind and ``walks`` of each item at most."""
    return _Draft(rng, sites=sites, walks=walks).finished()


class _Draft(Witness):
    """A witness with limits, stock and demand around it."""

    def _per_step(self, item: int, measure: str | None) -> Fraction:
        row = self.items[item]
        if measure in {None, "unit"}:
            return self.step(item)
        if measure in {"weight_kg", "volume_m3"}:
            return Fraction(row[measure]) * self.step(item)
        contains = {pack["unit"]: pack["contains"] for pack in row["packs"]}
        return self.step(item) / Fraction(contains[measure])

    def _limit_lanes(self) -> None:
        for row, lane in enumerate(self.lanes):
            able = [i for i, x in enumerate(self.items) if lane.get("item", x["id"]) == x["id"]]
            measure = lane.get("measure")
            walked = [self.walked.lane.get((row, item), 0) for item in able]
            used = [
                steps * self._per_step(item, measure)
                for item, steps in zip(able, walked, strict=True)
            ]
            if self.often(0.45):
                # Rounded up, so that rounding down to steps leaves the walked ones.
                room = max(used) * self.rng.choice(
                    [Fraction(1), Fraction(1), Fraction(3, 2), Fraction(2)]
                )
                lane["capacity"] = self.quantity_text(Fraction(ceil(room * 1000), 1000))
            if min(walked) > 0 and self.often(0.4):
                self._force(lane, able, walked, measure)
            if "item" not in lane and ("capacity" in lane or "must_ship" in lane):
                lane["per"] = "item"

    def _force(
        self, lane: dict[str, Any], able: Sequence[int], walked: Sequence[int], measure: str | None
    ) -> None:
        """Give a lane a must-ship or a fixed quantity within what walked on it."""
        least = min(
            steps * self._per_step(item, measure) for item, steps in zip(able, walked, strict=True)
        )
        if len(able) > 1 and len({self._per_step(item, measure) for item in able}) > 1:
            return
        text = plain_text(least, decimals=3)
        if text is None:
            return
        fixed = "id" in lane and len(able) == 1 and self.often(0.6)
        if fixed and self.lanes.index(lane) not in self.closed_lanes:
            self.rules.append(
                {"rule": "fixed_quantity", "lanes": {"ids": [lane["id"]]}, "quantity": text}
            )
        else:
            lane["must_ship"] = text

    def _limit_sites(self) -> None:
        """Draw throughput limits of one item that the witness keeps."""
        flows = {
            "received": self.walked.received,
            "sent": self.walked.sent,
            "through": self.walked.through,
        }
        for site in self.sites:
            for flow, walked in flows.items():
                item = self.rng.randrange(len(self.items))
                if self.often(0.15 if walked.get((site["id"], item)) else 0.02):
                    measure = self.rng.choice([None, "weight_kg"])
                    room = walked.get((site["id"], item), 0) * self._per_step(item, measure)
                    rule = {
                        "rule": "throughput",
                        "sites": {"ids": [site["id"]]},
                        "items": {"ids": [self.items[item]["id"]]},
                        "flow": flow,
                        "maximum": self.quantity_text(Fraction(ceil(room * 1000), 1000)),
                    }
                    if measure is not None:
                        rule["measure"] = measure
                    self.rules.append(rule)

    # ------------------------------------------------------------------ supply and demand

    def _in_unit(self, row: dict[str, Any], item: int, quantity: Fraction) -> None:
        """State ``quantity`` of item units in the item's unit, a pack or another standard unit."""
        units = [(p["unit"], Fraction(p["contains"])) for p in self.items[item]["packs"]]
        if self.items[item]["unit"] == "KGM":
            units += [("TNE", Fraction(1000)), ("GRM", Fraction(1, 1000))]
        if units and self.often(0.3):
            unit, factor = self.rng.choice(units)
            text = plain_text(quantity / factor, decimals=3)
            if text is not None:
                row |= {"unit": unit, "quantity": text}
                return
        row["quantity"] = self.quantity_text(quantity)

    def _supply(self, *, scarce: bool) -> list[dict[str, Any]]:
        rows = []
        for site, item in sorted(self.stocked):
            step = self.step(item)
            spare = self.rng.choice([0, 0, 3, 20])
            left = (self.walked.drawn.get((site, item), 0) + spare) * step
            parts: list[Fraction] = []
            while len(parts) < 2 and self.often(0.4):
                # Off the step on purpose: running totals are rounded, not rows.
                parts.append(Fraction(self.rng.randint(0, int(left * 8)), 8))
                left -= parts[-1]
            own = [dict[str, Any](site=site, item=self.items[item]["id"]) for _ in [*parts, left]]
            for row, quantity in zip(own, [*parts, left], strict=True):
                self._in_unit(row, item, quantity)
                if self.often(0.6):
                    row["unit_cost"] = self.money(300)
                if self.often(0.3):
                    row["lot"] = f"lot {self.rng.randint(1, 3)}"
                if self.often(0.2):
                    row["best_before"] = f"2026-0{self.rng.randint(3, 9)}-01"
            if self.often(0.2):
                self._keep(own[-1], item, spare + (self.rng.choice([0, 7]) if scarce else 0))
            rows += own
        return rows

    def _keep(self, row: dict[str, Any], item: int, steps: int) -> None:
        """Keep stock in the unit of its row, no more than is spare unless goods are scarce."""
        factor = Fraction(1)
        for pack in self.items[item]["packs"]:
            if pack["unit"] == row.get("unit"):
                factor = Fraction(pack["contains"])
        factor = {"TNE": Fraction(1000), "GRM": Fraction(1, 1000)}.get(row.get("unit", ""), factor)
        text = plain_text(steps * self.step(item) / factor, decimals=3)
        if text is not None:
            row["keep"] = {"quantity": text, "priority": self.rng.choice(PRIORITIES)}

    def _demand(self, *, scarce: bool, rounding: str | None) -> list[dict[str, Any]]:
        rows: list[dict[str, Any]] = []
        for (site, item), pieces in sorted(self.walked.served.items()):
            for origin, steps in pieces:
                row: dict[str, Any] = {"site": site, "item": self.items[item]["id"]}
                quantity = steps * self.step(item)
                if rounding and self.often(0.3):
                    # The witness serves what is left after rounding down, or up from below.
                    quantity += Fraction(1, 8) * (1 if rounding == "down" else -1)
                self._in_unit(row, item, quantity)
                if self.often(0.1):
                    others = [store for store in self.stores if self.often(0.4)]
                    row["origins"] = sorted({origin, *others})
                rows.append(row)
        extra = self.rng.randint(1, 4) if scarce else 0
        for _ in range(extra):
            item = self.rng.randrange(len(self.items))
            row = {"site": self.rng.choice(self.shops), "item": self.items[item]["id"]}
            self._in_unit(row, item, self.rng.randint(0, 25) * self.step(item))
            rows.append(row)
        for number, row in enumerate(rows):
            self._claim(row)
            row["reference"] = f"SO-{number}{self.rng.choice(MARKS)}"
            if self.often(0.2):
                row["ordered_at"] = f"2026-02-0{self.rng.randint(1, 3)}T08:00:00Z"
        return rows

    def _claim(self, row: dict[str, Any]) -> None:
        """Let a line say by what it competes: nothing, a priority, or money."""
        kind = self.rng.choice(["", "", "priority", "priority", "shortage_cost", "worth_at_most"])
        if kind == "priority":
            row[kind] = self.rng.choice(PRIORITIES)
        elif kind:
            row[kind] = self.money(3000)

    # ------------------------------------------------------------------ the whole

    def finished(self) -> RandomNetwork:
        """Put limits, supply and demand around the witness and return the network."""
        scarce = self.often(0.5)
        self._limit_lanes()
        self._limit_sites()
        options: dict[str, str] = {}
        rounding = self.rng.choice([None, None, None, "up", "down"])
        if rounding:
            options["demand_rounding"] = rounding
        if self.often(0.25):
            options["shortages"] = "forbid"
        if self.often(0.1):
            options["worth_at_most"] = self.money(2000)
        supply = self._supply(scarce=scarce)
        demand = self._demand(scarce=scarce, rounding=rounding)
        for number, rule in enumerate(self.rules):
            rule["id"] = f"R{number}"
        document = network_document(
            items=self.items,
            sites=self.sites,
            supply=supply,
            demand=demand,
            lanes=self.lanes,
            rules=self.rules,
            currency="EUR",
        )
        return RandomNetwork(
            document=_keep_to_what_is_built(document, options), options=options, scarce=scarce
        )


def _keep_to_what_is_built(document: Document, options: dict[str, str]) -> Document:
    """Take out what the service refuses by name, so that the rest is planned."""
    rows = {row["reference"]: row for row in document["demand"]}
    for problem in read_items(document, options):
        for line in problem.lines:
            arriving = (lane for lane in problem.lanes if lane.destination == line.site)
            behind = [problem.stock_behind(lane) for lane in arriving]
            named = line.origins or frozenset()
            if any(stock & named and stock - named for stock in behind):
                # Refused as "origins_behind_cross_dock": the line could not tell its goods apart.
                rows[line.reference].pop("origins", None)
    for problem in read_items(document, options):
        # Where goods are kept apart a limit on all of them needs a linear program.
        document["rules"] = [
            rule
            for rule in document["rules"]
            if rule["rule"] != "throughput"
            or rule["items"] != {"ids": [problem.item]}
            or all(problem.is_joined(site) for site in rule["sites"]["ids"])
            or (rule["flow"] == "sent" and not problem.cross_docks & {*rule["sites"]["ids"]})
        ]
    return document
