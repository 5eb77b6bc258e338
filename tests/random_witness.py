"""What random networks are drawn around: items, places, lanes, and goods that walk on them."""

from collections.abc import Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from random import Random
from typing import Any

# Characters that names of lanes must encode, and one beyond ASCII.
MARKS = ("", "", "", ">1", "#2", "%", " ü")


@dataclass(slots=True)
class Walked:
    """A witness: steps by lane and item, drawn and served steps by site and item."""

    lane: dict[tuple[int, int], int] = field(default_factory=dict)
    drawn: dict[tuple[str, int], int] = field(default_factory=dict)
    served: dict[tuple[str, int], list[tuple[str, int]]] = field(default_factory=dict)
    received: dict[tuple[str, int], int] = field(default_factory=dict)
    sent: dict[tuple[str, int], int] = field(default_factory=dict)
    through: dict[tuple[str, int], int] = field(default_factory=dict)


def plain_text(value: Fraction, *, decimals: int) -> str | None:
    """Return the plain decimal text of ``value``, or None where it needs more decimals."""
    scaled = value * 10**decimals
    if scaled.denominator != 1:
        return None
    digits = f"{abs(int(scaled)):0{decimals + 1}d}"
    whole, part = digits[: len(digits) - decimals], digits[len(digits) - decimals :]
    text = whole + ("." + part.rstrip("0") if part.rstrip("0") else "")
    return ("-" if scaled < 0 else "") + text


class Witness:
    """Open ways and the goods that walked on them; every method draws one kind of thing."""

    def __init__(self, rng: Random, *, sites: int, walks: int) -> None:
        """Draw places and lanes, close some, and let goods walk on the others."""
        self.rng = rng
        # Few different amounts make many plans equally good.
        self.few_amounts = self.often(0.5)
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
            if self.often(0.8)
        }
        for item in range(len(self.items)):
            for _ in range(rng.randint(1, walks)):
                self._walk(item)
            self._circle(item)

    # ------------------------------------------------------------------ drawing small things

    def often(self, chance: float) -> bool:
        """Return True with this chance."""
        # The least draw means no, so that Hypothesis shrinks towards networks without the thing.
        return self.rng.random() >= 1 - chance

    def money(self, most: int = 900) -> str:
        """Draw an amount with up to two decimals, or one of three."""
        if self.few_amounts:
            return str(self.rng.randint(0, 2))
        text = plain_text(Fraction(self.rng.randint(0, most), 100), decimals=2)
        assert text is not None
        return text

    def step(self, item: int) -> Fraction:
        """Return the least quantity of an item that ships."""
        return Fraction(self.items[item]["step"])

    def quantity_text(self, value: Fraction) -> str:
        """Return a quantity as its text."""
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
            if self.often(0.2):
                roles.add(self.rng.choice(["warehouse", "cross_dock", "ship_to"]))
            site: dict[str, Any] = {
                "id": f"{kind[0].upper()}{number}{self.rng.choice(MARKS)}",
                "roles": sorted(roles),
            }
            if self.often(0.5):
                site["handling_cost"] = self.money(200)
            elif self.often(0.3):
                site["handling_cost"] = {"I0": self.money(200)}
            if self.often(0.3):
                site["tags"] = ["coast"]
            sites.append(site)
        return sites

    # ------------------------------------------------------------------ lanes and closures

    def _lanes(self) -> list[dict[str, Any]]:
        lanes: list[dict[str, Any]] = []
        groups: set[tuple[str, str, str | None]] = set()
        for start in dict.fromkeys([*self.stores, *self.docks]):
            for end in dict.fromkeys([*self.shops, *self.docks]):
                while start != end and self.often(0.55):
                    item = self.rng.choice([None, *(item["id"] for item in self.items)])
                    lane: dict[str, Any] = {
                        "origin": start,
                        "destination": end,
                        "unit_cost": self.money(),
                    }
                    if item is not None:
                        lane["item"] = item
                    if (start, end, item) in groups or self.often(0.5):
                        lane["id"] = f"L{len(lanes)}"
                    else:
                        groups.add((start, end, item))
                    self._dress_lane(lane, pure=end not in self.docks)
                    lanes.append(lane)
        return lanes

    def _dress_lane(self, lane: dict[str, Any], *, pure: bool) -> None:
        """Add what a lane may have beside its ends; ``pure`` ends let no loop of credits arise."""
        if pure and self.often(0.05):
            lane["unit_cost"] = "-" + self.money() if lane["unit_cost"] != "0" else "-1"
            if lane["unit_cost"] == "-0":
                lane["unit_cost"] = "0"
        if self.often(0.3):
            lane["carrier"] = self.rng.choice(["C-RAIL", "C-ROAD"])
        if self.often(0.2):
            lane["tags"] = ["night"]
        measures = ["weight_kg", "volume_m3"]
        if "item" in lane:
            item = next(item for item in self.items if item["id"] == lane["item"])
            measures += [pack["unit"] for pack in item["packs"]]
        if self.often(0.25) or ("item" not in lane and self.often(0.3)):
            lane["measure"] = self.rng.choice(measures)

    def _closures(self) -> tuple[set[int], set[str]]:
        """Draw closures before anything walks; a rule of another day closes nothing."""
        lanes: set[int] = set()
        sites: set[str] = set()
        if self.often(0.25):
            named = [row for row, lane in enumerate(self.lanes) if "id" in lane]
            if named:
                row = self.rng.choice(named)
                lanes.add(row)
                rule = {"rule": "closure", "lanes": {"ids": [self.lanes[row]["id"]]}}
                self.rules.append(rule)
        if self.often(0.15):
            site = self.rng.choice(self.sites)["id"]
            sites.add(site)
            self.rules.append({"rule": "closure", "sites": {"ids": [site]}})
        if self.often(0.15):
            # Other lanes of one origin, of a carrier: the witness keeps away from all of them.
            selector = {"origin": [self.rng.choice(self.stores)], "carrier": ["C-RAIL"]}
            self.rules.append({"rule": "closure", "lanes": selector})
            lanes |= {
                row
                for row, lane in enumerate(self.lanes)
                if lane["origin"] in selector["origin"] and lane.get("carrier") == "C-RAIL"
            }
        if self.often(0.15):
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
        while site not in self.shops or (site in self.docks and self.often(0.5)):
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
        if pairs and self.often(0.3):
            rows = self.rng.choice(pairs)
            self._ride(rows, item, 3)
            self._pass([self.lanes[row]["origin"] for row in rows], item, 3)
