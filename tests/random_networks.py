"""Random networks that are feasible because a witness flow was drawn first.

Goods walk from stock to demand along open lanes; supply, demand, capacities, must-ships, fixed
quantities, throughput limits and kept stock are then chosen so that those walks fit. Only what
is scarce on purpose (more wanted than walked) can be short, and no forced quantity ever fails.
Every choice is made by one ``random.Random``, which may be Hypothesis's own, so that it shrinks.
"""

from collections.abc import Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from math import ceil
from random import Random
from typing import Any

from tests.factories import Document, network_document
from tests.oracle_reading import read_items

# Characters that names of lanes must encode, and one beyond ASCII.
MARKS = ("", "", "", ">1", "#2", "%", " ü")
PRIORITIES = (1, 2, 3, 5, 9)


@dataclass(slots=True)
class Walked:
    """A witness: steps by lane and item, drawn and served steps by site and item."""

    lane: dict[tuple[int, int], int] = field(default_factory=dict)
    drawn: dict[tuple[str, int], int] = field(default_factory=dict)
    served: dict[tuple[str, int], list[tuple[str, int]]] = field(default_factory=dict)
    received: dict[tuple[str, int], int] = field(default_factory=dict)
    sent: dict[tuple[str, int], int] = field(default_factory=dict)
    through: dict[tuple[str, int], int] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, kw_only=True)
class RandomNetwork:
    """A drawn network: the document, the options to plan it with, and whether it may be short."""

    document: Document
    options: dict[str, str]
    scarce: bool


def plain_text(value: Fraction, *, decimals: int) -> str | None:
    """Return the plain decimal text of ``value``, or None where it needs more decimals."""
    scaled = value * 10**decimals
    if scaled.denominator != 1:
        return None
    digits = f"{abs(int(scaled)):0{decimals + 1}d}"
    whole, part = digits[: len(digits) - decimals], digits[len(digits) - decimals :]
    text = whole + ("." + part.rstrip("0") if part.rstrip("0") else "")
    return ("-" if scaled < 0 else "") + text


def draw_network(rng: Random, *, sites: int = 4, walks: int = 5) -> RandomNetwork:
    """Draw one network; ``sites`` of each kind and ``walks`` of each item at most."""
    return _Draft(rng, sites=sites, walks=walks).finished()


class _Draft:
    """A network that grows; every method draws one kind of thing."""

    def __init__(self, rng: Random, *, sites: int, walks: int) -> None:
        self.rng = rng
        self.rules: list[dict[str, Any]] = []
        self.walked = Walked()
        self.items = [self._item(number) for number in range(rng.randint(1, 3))]
        self.sites = self._sites(sites)
        self.docks = [s["id"] for s in self.sites if "cross_dock" in s["roles"]]
        self.stores = [s["id"] for s in self.sites if "warehouse" in s["roles"]]
        self.shops = [s["id"] for s in self.sites if "ship_to" in s["roles"]]
        self.lanes = self._lanes()
        self.closed_lanes, self.closed_sites = self._closures()
        self.stocked = {
            (store, item)
            for store in self.stores
            for item in range(len(self.items))
            if rng.random() < 0.8
        }
        for item in range(len(self.items)):
            for _ in range(rng.randint(1, walks)):
                self._walk(item)
            self._circle(item)

    # ------------------------------------------------------------------ drawing small things

    def _often(self, chance: float) -> bool:
        return self.rng.random() < chance

    def _money(self, most: int = 900) -> str:
        """Draw an amount with up to two decimals."""
        text = plain_text(Fraction(self.rng.randint(0, most), 100), decimals=2)
        assert text is not None
        return text

    def _step(self, item: int) -> Fraction:
        return Fraction(self.items[item]["step"])

    def _quantity(self, value: Fraction) -> str:
        text = plain_text(value, decimals=3)
        assert text is not None, "steps have at most two decimals"
        return text

    def _item(self, number: int) -> dict[str, Any]:
        step = self.rng.choice(["1", "1", "2", "0.5", "12", "0.25"])
        item: dict[str, Any] = {
            "id": f"I{number}",
            "unit": self.rng.choice(["bag", "KGM"]),
            "step": step,
            "weight_kg": self.rng.choice(["25.2", "1", "0.125"]),
            "volume_m3": self.rng.choice(["0.021", "0.5"]),
            "tags": self.rng.choice([[], ["heavy"], ["heavy", "wet"]]),
        }
        packs = [
            {"unit": "layer", "contains": self.rng.choice(["8", "6"])},
            {"unit": "pallet", "contains": self.rng.choice(["40", "48"])},
        ]
        item["packs"] = packs[: self.rng.randint(0, 2)]
        return item

    def _sites(self, most: int) -> list[dict[str, Any]]:
        """Draw warehouses, cross-docks and ship-tos, some of which have a second or third role."""
        kinds = ["warehouse"] * self.rng.randint(1, most)
        kinds += ["cross_dock"] * self.rng.randint(0, max(1, most // 2))
        kinds += ["ship_to"] * self.rng.randint(1, most)
        sites = []
        for number, kind in enumerate(kinds):
            roles = {kind}
            if self._often(0.2):
                roles.add(self.rng.choice(["warehouse", "cross_dock", "ship_to"]))
            site: dict[str, Any] = {
                "id": f"{kind[0].upper()}{number}{self.rng.choice(MARKS)}",
                "roles": sorted(roles),
            }
            if self._often(0.5):
                site["handling_cost"] = self._money(200)
            elif self._often(0.3):
                site["handling_cost"] = {"I0": self._money(200)}
            if self._often(0.3):
                site["tags"] = ["coast"]
            sites.append(site)
        return sites

    # ------------------------------------------------------------------ lanes and closures

    def _lanes(self) -> list[dict[str, Any]]:
        lanes: list[dict[str, Any]] = []
        groups: set[tuple[str, str, str | None]] = set()
        for start in dict.fromkeys([*self.stores, *self.docks]):
            for end in dict.fromkeys([*self.shops, *self.docks]):
                while start != end and self._often(0.55):
                    item = self.rng.choice([None, *(item["id"] for item in self.items)])
                    lane: dict[str, Any] = {
                        "origin": start,
                        "destination": end,
                        "unit_cost": self._money(),
                    }
                    if item is not None:
                        lane["item"] = item
                    if (start, end, item) in groups or self._often(0.5):
                        lane["id"] = f"L{len(lanes)}"
                    else:
                        groups.add((start, end, item))
                    self._dress_lane(lane, pure=end not in self.docks)
                    lanes.append(lane)
        return lanes

    def _dress_lane(self, lane: dict[str, Any], *, pure: bool) -> None:
        """Add what a lane may have beside its ends; ``pure`` ends let no loop of credits arise."""
        if pure and self._often(0.05):
            lane["unit_cost"] = "-" + self._money() if lane["unit_cost"] != "0" else "-1"
            if lane["unit_cost"] == "-0":
                lane["unit_cost"] = "0"
        if self._often(0.3):
            lane["carrier"] = self.rng.choice(["C-RAIL", "C-ROAD"])
        if self._often(0.2):
            lane["tags"] = ["night"]
        measures = ["weight_kg", "volume_m3"]
        if "item" in lane:
            item = next(item for item in self.items if item["id"] == lane["item"])
            measures += [pack["unit"] for pack in item["packs"]]
        if self._often(0.25) or ("item" not in lane and self._often(0.3)):
            lane["measure"] = self.rng.choice(measures)

    def _closures(self) -> tuple[set[int], set[str]]:
        """Draw closures before anything walks; a rule of another day closes nothing."""
        lanes: set[int] = set()
        sites: set[str] = set()
        if self._often(0.25):
            named = [row for row, lane in enumerate(self.lanes) if "id" in lane]
            if named:
                row = self.rng.choice(named)
                lanes.add(row)
                rule = {"rule": "closure", "lanes": {"ids": [self.lanes[row]["id"]]}}
                self.rules.append(rule)
        if self._often(0.15):
            site = self.rng.choice(self.sites)["id"]
            sites.add(site)
            self.rules.append({"rule": "closure", "sites": {"ids": [site]}})
        if self._often(0.15):
            # Other lanes of one origin, of a carrier: the witness keeps away from all of them.
            selector = {"origin": [self.rng.choice(self.stores)], "carrier": ["C-RAIL"]}
            self.rules.append({"rule": "closure", "lanes": selector})
            lanes |= {
                row
                for row, lane in enumerate(self.lanes)
                if lane["origin"] in selector["origin"] and lane.get("carrier") == "C-RAIL"
            }
        if self._often(0.15):
            self.rules.append(
                {"rule": "closure", "sites": {"role": ["warehouse"]}, "until": "2026-02-02"}
            )
        return lanes, sites

    # ------------------------------------------------------------------ the witness

    def _open_rows(self, site: str, item: int) -> list[int]:
        return [
            row
            for row, lane in enumerate(self.lanes)
            if lane["origin"] == site
            and lane.get("item", self.items[item]["id"]) == self.items[item]["id"]
            and row not in self.closed_lanes
            and lane["destination"] not in self.closed_sites
        ]

    def _walk(self, item: int) -> None:
        """Let some steps of ``item`` walk from stock to a ship-to, if a way is found."""
        stores = [
            store
            for store, stocked in sorted(self.stocked)
            if stocked == item and store not in self.closed_sites
        ]
        if not stores:
            return
        start = self.rng.choice(stores)
        site, rows, seen = start, list[int](), {start}
        while site not in self.shops or (site in self.docks and self._often(0.5)):
            ways = [
                row
                for row in self._open_rows(site, item)
                if self.lanes[row]["destination"] not in seen
            ]
            if not ways or (rows and site not in self.docks):
                break
            rows.append(self.rng.choice(ways))
            site = self.lanes[rows[-1]]["destination"]
            seen.add(site)
        if site not in self.shops:
            return
        steps = self.rng.randint(1, 30)
        self.walked.drawn[start, item] = self.walked.drawn.get((start, item), 0) + steps
        self.walked.served.setdefault((site, item), []).append((start, steps))
        self._pass([start, *(self.lanes[row]["destination"] for row in rows)], item, steps)
        self._ride(rows, item, steps)

    def _pass(self, places: Sequence[str], item: int, steps: int) -> None:
        for place in places:
            key = (place, item)
            self.walked.through[key] = self.walked.through.get(key, 0) + steps

    def _ride(self, rows: Sequence[int], item: int, steps: int) -> None:
        for row in rows:
            self.walked.lane[row, item] = self.walked.lane.get((row, item), 0) + steps
            for side, end in (("origin", self.walked.sent), ("destination", self.walked.received)):
                key = (self.lanes[row][side], item)
                end[key] = end.get(key, 0) + steps

    def _circle(self, item: int) -> None:
        """Now and then let goods circle between cross-docks, as only a must-ship can want."""
        name = self.items[item]["id"]
        pairs = [
            (there, back)
            for there, lane in enumerate(self.lanes)
            for back in self._open_rows(lane["destination"], item)
            if there in self._open_rows(lane["origin"], item)
            and lane["origin"] in set(self.docks) - self.closed_sites
            and lane["destination"] in self.docks
            and self.lanes[back]["destination"] == lane["origin"]
            and lane.get("item") == self.lanes[back].get("item") == name
        ]
        if pairs and self._often(0.3):
            rows = self.rng.choice(pairs)
            self._ride(rows, item, 3)
            self._pass([self.lanes[row]["origin"] for row in rows], item, 3)

    # ------------------------------------------------------------------ limits around the witness

    def _per_step(self, item: int, measure: str | None) -> Fraction:
        row = self.items[item]
        if measure in {None, "unit"}:
            return self._step(item)
        if measure in {"weight_kg", "volume_m3"}:
            return Fraction(row[measure]) * self._step(item)
        contains = {pack["unit"]: pack["contains"] for pack in row["packs"]}
        return self._step(item) / Fraction(contains[measure])

    def _limit_lanes(self) -> None:
        for row, lane in enumerate(self.lanes):
            able = [i for i, x in enumerate(self.items) if lane.get("item", x["id"]) == x["id"]]
            measure = lane.get("measure")
            walked = [self.walked.lane.get((row, item), 0) for item in able]
            used = [
                steps * self._per_step(item, measure)
                for item, steps in zip(able, walked, strict=True)
            ]
            if self._often(0.45):
                # Rounded up, so that rounding down to steps leaves the walked ones.
                room = max(used) * self.rng.choice([1, 1, Fraction(3, 2), 2])
                lane["capacity"] = self._quantity(Fraction(ceil(room * 1000), 1000))
            if min(walked) > 0 and self._often(0.3):
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
        fixed = "id" in lane and len(able) == 1 and self._often(0.3)
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
                if self._often(0.15 if walked.get((site["id"], item)) else 0.02):
                    measure = self.rng.choice([None, "weight_kg"])
                    room = walked.get((site["id"], item), 0) * self._per_step(item, measure)
                    rule = {
                        "rule": "throughput",
                        "sites": {"ids": [site["id"]]},
                        "items": {"ids": [self.items[item]["id"]]},
                        "flow": flow,
                        "maximum": self._quantity(Fraction(ceil(room * 1000), 1000)),
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
        if units and self._often(0.3):
            unit, factor = self.rng.choice(units)
            text = plain_text(quantity / factor, decimals=3)
            if text is not None:
                row |= {"unit": unit, "quantity": text}
                return
        row["quantity"] = self._quantity(quantity)

    def _supply(self, *, scarce: bool) -> list[dict[str, Any]]:
        rows = []
        for site, item in sorted(self.stocked):
            step = self._step(item)
            spare = self.rng.choice([0, 0, 3, 20])
            left = (self.walked.drawn.get((site, item), 0) + spare) * step
            parts: list[Fraction] = []
            while len(parts) < 2 and self._often(0.4):
                # Off the step on purpose: running totals are rounded, not rows.
                parts.append(Fraction(self.rng.randint(0, int(left * 8)), 8))
                left -= parts[-1]
            own = [dict[str, Any](site=site, item=self.items[item]["id"]) for _ in [*parts, left]]
            for row, quantity in zip(own, [*parts, left], strict=True):
                self._in_unit(row, item, quantity)
                if self._often(0.6):
                    row["unit_cost"] = self._money(300)
                if self._often(0.3):
                    row["lot"] = f"lot {self.rng.randint(1, 3)}"
                if self._often(0.2):
                    row["best_before"] = f"2026-0{self.rng.randint(3, 9)}-01"
            if self._often(0.2):
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
        text = plain_text(steps * self._step(item) / factor, decimals=3)
        if text is not None:
            row["keep"] = {"quantity": text, "priority": self.rng.choice(PRIORITIES)}

    def _demand(self, *, scarce: bool, rounding: str | None) -> list[dict[str, Any]]:
        rows: list[dict[str, Any]] = []
        for (site, item), pieces in sorted(self.walked.served.items()):
            for origin, steps in pieces:
                row: dict[str, Any] = {"site": site, "item": self.items[item]["id"]}
                quantity = steps * self._step(item)
                if rounding and self._often(0.3):
                    # The witness serves what is left after rounding down, or up from below.
                    quantity += Fraction(1, 8) * (1 if rounding == "down" else -1)
                self._in_unit(row, item, quantity)
                if self._often(0.1):
                    others = [store for store in self.stores if self._often(0.4)]
                    row["origins"] = sorted({origin, *others})
                rows.append(row)
        extra = self.rng.randint(1, 4) if scarce else 0
        for _ in range(extra):
            item = self.rng.randrange(len(self.items))
            row = {"site": self.rng.choice(self.shops), "item": self.items[item]["id"]}
            self._in_unit(row, item, self.rng.randint(0, 25) * self._step(item))
            rows.append(row)
        for number, row in enumerate(rows):
            self._claim(row)
            row["reference"] = f"SO-{number}{self.rng.choice(MARKS)}"
            if self._often(0.2):
                row["ordered_at"] = f"2026-02-0{self.rng.randint(1, 3)}T08:00:00Z"
        return rows

    def _claim(self, row: dict[str, Any]) -> None:
        """Let a line say by what it competes: nothing, a priority, or money."""
        kind = self.rng.choice(["", "", "priority", "priority", "shortage_cost", "worth_at_most"])
        if kind == "priority":
            row[kind] = self.rng.choice(PRIORITIES)
        elif kind:
            row[kind] = self._money(3000)

    # ------------------------------------------------------------------ the whole

    def finished(self) -> RandomNetwork:
        """Put limits, supply and demand around the witness and return the network."""
        scarce = self._often(0.5)
        self._limit_lanes()
        self._limit_sites()
        options: dict[str, str] = {}
        rounding = self.rng.choice([None, None, None, "up", "down"])
        if rounding:
            options["demand_rounding"] = rounding
        if self._often(0.25):
            options["shortages"] = "forbid"
        if self._often(0.1):
            options["worth_at_most"] = self._money(2000)
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
        # A limit on all that passes or arrives where goods are kept apart needs a linear program.
        document["rules"] = [
            rule
            for rule in document["rules"]
            if rule["rule"] != "throughput"
            or rule["flow"] == "sent"
            or rule["items"] != {"ids": [problem.item]}
            or all(problem.is_joined(site) for site in rule["sites"]["ids"])
        ]
    return document
