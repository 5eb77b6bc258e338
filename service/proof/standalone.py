"""Check the evidence of a planning run with nothing but Python.

    python3 verify.py evidence.zip

Prints one line for each problem, then the verdict: intact (exit code 0), broken (1) or unreadable
(2). Needs Python 3.9 or later and no other package. Nothing is taken from the file on trust: it is
read as bytes, within bounds, and nothing in it is run.

How to read this program, from top to bottom:

1. the zip and its JSON, read strictly
2. the network in normal form, and whether it is in normal form
3. options, and the shapes of plan and certificate
4. the history, a chain of hashes
5. the formal network of one item: places, and arcs between them
6. the proof: limits, balance, prices; or the cut that shows that there is no plan
7. the tables of the plan, which must say the same as the proof

Quantities and money are exact (whole numbers and fractions); there is no floating point.
"""

from __future__ import annotations

import datetime as dt
import hashlib
import itertools
import json
import re
import struct
import sys
import zlib
from array import array
from collections import defaultdict
from fractions import Fraction
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Iterator

# Sites, references and the like, in the order that is written where it is made.
Key = tuple[Any, ...]
# A value of JSON, or a column; what it is in truth is checked where it is read.
Value = Any

# From a break on, so much of the measure, at a rate.
Parted = tuple[Fraction, Fraction, Fraction]

NOTHING_BEFORE = "sha-256:" + "0" * 64
PROBLEMS_OF_A_KIND_MAX = 20


class Bad(Exception):  # noqa: N818 - short, and read aloud: "bad, because"
    """What is read is not what it should be; the text says why."""


class Report:
    """The problems found so far: code, sentence and place."""

    def __init__(self) -> None:
        """Start with none."""
        self.problems: list[tuple[str, str, str]] = []
        self.counts: dict[str, int] = defaultdict(int)

    def add(self, code: str, detail: str, place: str = "") -> None:
        """Note a problem, but no more than some of one kind."""
        self.counts[code] += 1
        if self.counts[code] <= PROBLEMS_OF_A_KIND_MAX:
            self.problems.append((code, detail, place))


# ------------------------------------------------------------------ 1. the zip and its JSON


def sha256(data: bytes) -> str:
    """Return a digest as it is written in all documents."""
    return "sha-256:" + hashlib.sha256(data).hexdigest()


def unzip(data: bytes) -> tuple[dict[str, bytes], list[str]]:
    """Return the entries of an evidence zip, and the names of those with a wrong check sum.

    The zips that count as evidence are of one rigid form: nothing compressed, entries sorted, one
    time stamp, no gaps, no comments. So there is nothing to inflate, and no two ways to read one.
    """
    if len(data) >= 2**32:
        raise Bad("too large for a zip of this form")
    entries: dict[str, bytes] = {}
    damaged, directory, at, last = [], b"", 0, b""
    while data[at : at + 4] == b"PK\x03\x04":
        if len(data) < at + 30:
            raise Bad("an entry is cut off")
        check_sum, size, _, length = struct.unpack_from("<IIIH", data, at + 14)
        name = data[at + 30 : at + 30 + length]
        same = struct.pack("<5H3I2H", 20, 0, 0, 0, 33, check_sum, size, size, length, 0)
        start = at + 30 + length
        content = data[start : start + size]
        if data[at + 4 : at + 30] != same or len(content) < size or len(name) < length:
            raise Bad("the header of an entry is of another form")
        if name <= last or max(name) > 127:
            raise Bad("the entries are not sorted and distinct")
        if zlib.crc32(content) != check_sum:
            damaged.append(name.decode())
        entries[name.decode()] = content
        directory += b"PK\x01\x02" + struct.pack("<H", 3 * 256 + 20) + same
        directory += struct.pack("<3H2I", 0, 0, 0, 0o100644 << 16, at) + name
        at, last = start + size, name
    count = len(entries)
    if count > 65535:
        raise Bad("too many entries")
    end = struct.pack("<4H2IH", 0, 0, count, count, len(directory), at, 0)
    if data[at:] != directory + b"PK\x05\x06" + end:
        raise Bad("the directory of the zip does not match its entries")
    return entries, damaged


def parse(data: bytes) -> Value:
    """Return the value of JSON that is not nested deeply and says nothing twice."""
    depth = 0
    for mark in re.sub(rb'"[^"\\]*(?:\\.[^"\\]*)*"|[^\[\]{}"]+', b"", data, flags=re.DOTALL):
        depth += (mark in b"[{") - (mark in b"]}")
        if depth > 32:
            raise Bad("nested too deeply")

    def members(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
        if len({key for key, _ in pairs}) < len(pairs):
            raise Bad("a key occurs twice")
        return dict(pairs)

    def number(digits: str) -> int:
        if len(digits) > 18:
            raise Bad("a number is too long")
        return int(digits)

    def constant(name: str) -> None:
        raise Bad(name + " is not JSON")

    try:
        value = json.loads(
            data.decode("utf-8"),
            object_pairs_hook=members,
            parse_int=number,
            parse_constant=constant,
        )
        if b"\\u" in data:
            json.dumps(value, ensure_ascii=False).encode("utf-8")
    except (ValueError, RecursionError) as error:
        raise Bad(f"not JSON: {error}") from None
    return value


def canonical(value: Value) -> bytes:
    """Return the bytes of RFC 8785 for values without fractions; Bad if there are none."""
    if value is None or value is True or value is False:
        return {None: b"null", True: b"true", False: b"false"}[value]
    if isinstance(value, str):
        return json.dumps(value, ensure_ascii=False).encode("utf-8")
    if isinstance(value, int):
        if abs(value) >= 2**53:
            raise Bad("a whole number is too large")
        return str(value).encode()
    if isinstance(value, list):
        return b"[" + b",".join(canonical(element) for element in value) + b"]"
    if isinstance(value, dict):
        ordered = sorted(value, key=lambda key: key.encode("utf-16-be"))
        parts = (canonical(key) + b":" + canonical(value[key]) for key in ordered)
        return b"{" + b",".join(parts) + b"}"
    raise Bad("a fraction has no canonical form here")


def parse_canonical(data: bytes) -> Value:
    """Return the value of JSON that is spelled in the one canonical way."""
    value = parse(data)
    if canonical(value) != data:
        raise Bad("not in canonical form")
    return value


def need(holds: object, why: str) -> None:
    """Raise Bad with the reason unless something holds."""
    if not holds:
        raise Bad(why)


def is_whole(value: object) -> bool:
    """Return whether a value of JSON is a whole number."""
    return isinstance(value, int) and not isinstance(value, bool)


def rises(values: list[Any]) -> bool:
    """Return whether each value is above the one before."""
    return all(former < latter for former, latter in zip(values, values[1:]))  # noqa: B905, RUF007 - Python 3.9


# ------------------------------------------------------------------ 2. the network

DECIMAL = re.compile(r"-?(0|[1-9][0-9]{0,18})(\.[0-9]{0,5}[1-9])?")

# Name, kind, and for positions what they count; "!" marks what every row must have.
COLUMNS = {
    "supply": (
        "site!sites item!items quantity!decimal unit!texts unit_cost:decimal currency:texts "
        "on_hand:decimal reserved:decimal on_hold:decimal as_of:texts lot:texts best_before:texts "
        "available_from:texts keep_quantity:decimal keep_priority:small extra:texts"
    ),
    "demand": (
        "reference!text order:texts ordered_at:texts site!sites item!items quantity!decimal "
        "unit!texts priority:small shortage_cost:decimal worth_at_most:decimal earliest:texts "
        "due:texts latest:texts late_cost_per_day:decimal origins:texts tags:texts extra:texts"
    ),
    "lanes": (
        "id:text origin!sites destination!sites item:items unit_cost:decimal measure!texts "
        "must_ship:decimal capacity:decimal per:texts carrier:texts currency:texts charges:texts "
        "tariff:texts transit_days:decimal closes:texts departs:texts arrives:texts tags:texts "
        "extra:texts"
    ),
}

# UN/ECE Recommendation 20: each unit in the base unit of its dimension (kg, m3, m, m2, one).
# Written on its own, and as long as the list that the input is read by (network/units.py).
UNITS = {
    "mass": (
        "MGM 0.000001 GRM 0.001 HGM 0.1 KGM 1 DTN 100 TNE 1000 2U 1000 KTN 1000000 "
        "ONZ 0.028349523125 LBR 0.45359237 STI 6.35029318 CWA 45.359237 CWI 50.80234544 "
        "STN 907.18474 LTN 1016.0469088"
    ),
    "volume": (
        "MMQ 0.000000001 CMQ 0.000001 MLT 0.000001 CLT 0.00001 DLT 0.0001 DMQ 0.001 LTR 0.001 "
        "HLT 0.1 MTQ 1 INQ 0.000016387064 FTQ 0.028316846592 YDQ 0.764554857984 "
        "GLL 0.003785411784 QTL 0.000946352946 PTL 0.000473176473 BLL 0.158987294928 "
        "GLI 0.00454609 QTI 0.0011365225 PTI 0.00056826125"
    ),
    "length": "MMT 0.001 CMT 0.01 DMT 0.1 MTR 1 KTM 1000 INH 0.0254 FOT 0.3048 YRD 0.9144",
    "area": (
        "MMK 0.000001 CMK 0.0001 DMK 0.01 MTK 1 HAR 10000 KMK 1000000 INK 0.00064516 "
        "FTK 0.09290304 YDK 0.83612736"
    ),
    "count": (
        "C62 1 H87 1 EA 1 NAR 1 PR 2 DZN 12 SC 20 DPR 24 CEN 100 GRO 144 MIL 1000 T3 1000 GGR 1728"
    ),
}
WORDS = (
    "mg=MGM,g=GRM,gram=GRM,kg=KGM,kilogram=KGM,t=TNE,tonne=TNE,oz=ONZ,lb=LBR,pound=LBR,ml=MLT,"
    "cl=CLT,dl=DLT,l=LTR,litre=LTR,hl=HLT,m3=MTQ,cubic metre=MTQ,mm=MMT,cm=CMT,m=MTR,metre=MTR,"
    "km=KTM,kilometre=KTM,m2=MTK,square metre=MTK,piece=H87,each=EA,one=C62,pair=PR,dozen=DZN,"
    "gross=GRO,hundred=CEN,thousand=MIL"
)


# ISO 4217: the decimals of the smallest unit of each currency.
CURRENCIES = {
    0: "BIF CLP DJF GNF ISK JPY KMF KRW PYG RWF UGX UYI VND VUV XAF XOF XPF".split(),
    2: (
        "AED AFN ALL AMD AOA ARS AUD AWG AZN BAM BBD BDT BMD BND BOB BOV BRL BSD BTN BWP BYN BZD "
        "CAD CDF CHE CHF CHW CNY COP COU CRC CUP CVE CZK DKK DOP DZD EGP ERN ETB EUR FJD FKP GBP "
        "GEL GHS GIP GMD GTQ GYD HKD HNL HTG HUF IDR ILS INR IRR JMD KES KGS KHR KPW KYD KZT LAK "
        "LBP LKR LRD LSL MAD MDL MGA MKD MMK MNT MOP MRU MUR MVR MWK MXN MXV MYR MZN NAD NGN NIO "
        "NOK NPR NZD PAB PEN PGK PHP PKR PLN QAR RON RSD RUB SAR SBD SCR SDG SEK SGD SHP SLE SOS "
        "SRD SSP STN SVC SYP SZL THB TJS TMT TOP TRY TTD TWD TZS UAH USD USN UYU UZS VED VES WST "
        "XAD XCD XCG YER ZAR ZMW ZWG"
    ).split(),
    3: "BHD IQD JOD KWD LYD OMR TND".split(),
    4: "CLF UYW".split(),
}


def standard_units() -> dict[str, tuple[str, Fraction]]:
    """Return for each code and word the dimension and the amount in its base unit."""
    units = {}
    for dimension, text in UNITS.items():
        parts = text.split()
        for code, amount in zip(parts[::2], parts[1::2]):  # noqa: B905 - Python 3.9
            units[code] = (dimension, Fraction(amount))
    for pair in WORDS.split(","):
        word, code = pair.split("=")
        units[word] = units[code]
    return units


STANDARD_UNITS = standard_units()


def decimal(text: Value) -> Fraction:
    """Return the value of a shortest decimal."""
    need(isinstance(text, str) and DECIMAL.fullmatch(text) and text != "-0", "not a decimal")
    return Fraction(text)


def filled_texts(value: Value) -> list[str]:
    """Return an array of distinct sorted texts that is not empty."""
    need(isinstance(value, list) and value, "not an array with elements")
    need(all(isinstance(text, str) for text in value), "not an array of text")
    need(value == sorted(set(value)), "not sorted and distinct")
    texts: list[str] = value
    return texts


def text_members(value: Value) -> None:
    """Check an object of texts that is not empty."""
    need(isinstance(value, dict) and value, "not an object with members")
    need(all(isinstance(text, str) for text in value.values()), "not an object of text")


def common_fields(thing: Value, allowed: str) -> None:
    """Check what items and sites have in common."""
    need(isinstance(thing, dict) and set(thing) <= set(allowed.split()), "other fields")
    name = thing.get("id")
    need(isinstance(name, str) and re.fullmatch("[^\x00-\x1f\x7f]{1,64}", name), "not an id")
    for field in ("name", "gtin", "gln", "time_zone", "country"):
        need(isinstance(thing.get(field, ""), str), field + " is not text")
    for field in ("weight_kg", "volume_m3", "value", "latitude", "longitude"):
        if field in thing:
            thing[field] = decimal(thing[field])
    if "tags" in thing:
        filled_texts(thing["tags"])
    if "extra" in thing:
        text_members(thing["extra"])


def read_item(item: Value) -> None:
    """Check an item and turn its numbers into fractions."""
    common_fields(item, "id unit step name gtin weight_kg volume_m3 value packs tags extra")
    need(isinstance(item.get("unit"), str) and item["unit"], "an item without a unit")
    item["step"] = decimal(item.get("step"))
    need(item["step"] > 0, "a step of 0 or less")
    packs = item.get("packs", ())
    need(packs == () or (isinstance(packs, list) and packs), "packs are not an array")
    contents = {}
    for pack in packs:
        need(isinstance(pack, dict) and set(pack) == {"unit", "contains"}, "not a pack")
        need(isinstance(pack["unit"], str) and pack["unit"], "a pack without a unit")
        contents[pack["unit"]] = decimal(pack["contains"])
        need(contents[pack["unit"]] > 0, "a pack of nothing")
    need(rises([pack["unit"].encode() for pack in packs]), "packs are not sorted")
    item["packs"] = contents


def read_site(site: Value, item_ids: set[str]) -> None:
    """Check a site and turn its numbers into fractions."""
    common_fields(
        site,
        "id roles name gln latitude longitude time_zone country handling_cost tags extra",
    )
    roles = filled_texts(site.get("roles"))
    need(set(roles) <= {"warehouse", "cross_dock", "ship_to"}, "an unknown role")
    cost = site.get("handling_cost", "0")
    if isinstance(cost, dict):
        need(cost and set(cost) <= item_ids, "handling of unknown items")
        cost = {item: decimal(text) for item, text in cost.items()}
        site["handling"] = lambda item: cost.get(item, Fraction(0))
    else:
        anything = decimal(cost)
        site["handling"] = lambda _: anything


def read_selector(selector: Value, allowed: str) -> None:
    """Check a selector of a rule."""
    need(isinstance(selector, dict) and set(selector) <= set(allowed.split()), "not a selector")
    for texts in selector.values():
        need(texts == [] or filled_texts(texts), "not a list of text")


def read_rule(rule: Value) -> None:
    """Check a rule of the head."""
    need(isinstance(rule, dict), "a rule is not an object")
    kinds = {
        "closure": ("", "lanes sites"),
        "fixed_quantity": ("lanes quantity", ""),
        "throughput": ("sites flow maximum", "measure per"),
        "shared_capacity": ("lanes maximum", "measure per"),
    }
    need(isinstance(rule.get("rule"), str) and rule["rule"] in kinds, "an unknown rule")
    first, second = kinds[rule["rule"]]
    needed = {"rule", "id", *first.split()}
    possible = {"note", "owner", "from", "until", "items", *second.split()}
    need(needed <= set(rule) <= needed | possible, "a rule has other fields")
    for field, value in rule.items():
        if field in ("lanes", "sites", "items"):
            keys = {
                "lanes": "ids origin destination carrier tag",
                "sites": "ids role tag",
                "items": "ids tag",
            }
            read_selector(value, keys[field])
            continue
        need(isinstance(value, str), "a field of a rule is not text")
        if field in ("from", "until"):
            need(is_date(value), "not a date")
        elif field in ("quantity", "maximum"):
            need(DECIMAL.fullmatch(value) and value[0] != "-", "not a quantity")
        elif field in ("id", "measure"):
            need(value, "an empty field of a rule")
    need(rule.get("flow", "sent") in ("received", "sent", "through"), "an unknown flow")
    need(rule.get("per", "each") in ("each", "together"), "an unknown per")
    if rule["rule"] == "closure":
        need(("lanes" in rule) != ("sites" in rule), "a closure is of lanes or of sites")


def is_date(text: str) -> bool:
    """Return whether a text is a calendar date."""
    try:
        dt.date.fromisoformat(text)
    except ValueError:
        return False
    return re.fullmatch("[0-9]{4}-[0-9]{2}-[0-9]{2}", text) is not None


def read_storage(head: dict[str, Any]) -> None:
    """Check the rows that say where goods may stay overnight."""
    rows = head["storage"]
    need(isinstance(rows, list) and rows, "no storage")
    docks = {site["id"] for site in head["sites"] if "cross_dock" in site["roles"]}
    items = {item["id"] for item in head["items"]}
    keys_ = []
    for row in rows:
        need(isinstance(row, dict) and {"site"} <= set(row) <= {"site", "item"}, "no storage")
        need(isinstance(row["site"], str) and row["site"] in docks, "storage at no cross-dock")
        item = row.get("item")
        need("item" not in row or (isinstance(item, str) and item in items), "storage of no item")
        keys_.append((row["site"].encode(), (item or "").encode()))
    need(rises(keys_), "storage is not sorted")


def read_exchange_rates(head: dict[str, Any]) -> dict[str | None, Fraction]:
    """Return what one unit of each currency is in the plan's, which is called None here."""
    rates = head.get("exchange_rates", ())
    need(rates == () or (isinstance(rates, list) and rates), "no exchange rates")
    worth: dict[str | None, Fraction] = {None: Fraction(1)}
    for rate in rates:
        need(isinstance(rate, dict), "not an exchange rate")
        need({"currency", "rate"} <= set(rate), "an exchange rate lacks something")
        need(set(rate) <= set("currency rate per as_of source".split()), "other fields of a rate")
        need(all(isinstance(text, str) for text in rate.values()), "a rate is not text")
        need(re.fullmatch("[A-Z]{3}", rate["currency"]), "no currency of a rate")
        need(rate["currency"] != head["currency"], "a rate of the plan's own currency")
        need("as_of" not in rate or is_date(rate["as_of"]), "not a date")
        of, per = decimal(rate["rate"]), decimal(rate.get("per", "1"))
        need(of > 0 and per > 0 and rate.get("per") != "1", "not a rate")
        worth[rate["currency"]] = of / per
    need(rises([rate["currency"] for rate in rates]), "exchange rates are not sorted")
    return worth


def read_tariffs(head: dict[str, Any]) -> None:
    """Check the tariffs of the head and read them."""
    tariffs = head.get("tariffs", ())
    need(tariffs == () or (isinstance(tariffs, list) and tariffs), "no tariffs")
    before = ("", "")  # id of the tariff before, and until when it holds
    head["read_tariffs"] = []
    for tariff in tariffs:
        need(isinstance(tariff, dict), "not a tariff")
        read_tariff(tariff)
        need(tariff.get("currency") in head["worth"], "a tariff in another currency")
        need(tariff.get("currency", "") is not None, "a tariff in no currency")
        starts, ends = tariff.get("valid_from", ""), tariff.get("valid_until", "9999-99")
        need(before[0].encode() <= tariff["id"].encode(), "tariffs are not sorted")
        need(before[0] != tariff["id"] or before[1] < starts, "two tariffs of one id at a time")
        before = (tariff["id"], ends)
        head["read_tariffs"].append(Tariff(tariff))


def read_tariff(tariff: dict[str, Any]) -> None:
    """Check one tariff."""
    words = {"id", "basis", "carrier", "currency", "version", "source"}
    dates, amounts = {"valid_from", "valid_until"}, {"kg_per_m3", "minimum_charge"}
    amounts |= {"round_up_to", "round_money"}
    others = {"breaks", "break_type", "pay_up", "surcharge_percent"}
    need({"id", "basis", "breaks"} <= set(tariff), "a tariff lacks something")
    need(set(tariff) <= words | dates | amounts | others, "other fields of a tariff")
    for field, value in tariff.items():
        if field in words:
            need(isinstance(value, str) and value, "not a text")
        elif field in dates:
            need(isinstance(value, str) and is_date(value), "not a date")
        elif field in amounts:
            need(decimal(value) > 0, "an amount of 0 or less")
    percent = decimal(tariff.get("surcharge_percent", "1"))
    need(percent > -100 and percent != 0, "not a surcharge")
    chargeable = tariff["basis"] == "chargeable_weight"
    need(("kg_per_m3" in tariff) == chargeable, "kilograms of a cubic metre")
    need(isinstance(tariff["breaks"], list) and tariff["breaks"], "no breaks")
    for one in tariff["breaks"]:
        need(isinstance(one, dict) and set(one) == {"from", "rate"}, "not a break")
        need(decimal(one["rate"]) >= 0, "a rate below 0")
    starts = [decimal(one["from"]) for one in tariff["breaks"]]
    need(starts[0] == 0 and rises(starts), "breaks do not ascend from 0")
    kinds = ("incremental", "all_units") if len(starts) > 1 else (None,)
    kind = tariff.get("break_type")
    need(kind in kinds and ("break_type" in tariff) == (kind is not None), "a break type")
    need(tariff.get("pay_up", True) is True, "pay up or not")
    need("pay_up" not in tariff or kind == "all_units", "paying up without all units")
    need(tariff.get("valid_from", "") <= tariff.get("valid_until", "9999-99"), "a period")


class Tariff:
    """A tariff, and what it asks for a shipment: all goods on a lane on one departure."""

    def __init__(self, document: dict[str, Any]) -> None:
        """Read its numbers; Bad if they are none."""
        self.document, self.id = document, document["id"]
        self.starts, self.ends = (
            document.get("valid_from", ""),
            document.get("valid_until", "9999-99"),
        )
        self.currency: str | None = document.get("currency")
        self.breaks = [(decimal(one["from"]), decimal(one["rate"])) for one in document["breaks"]]
        self.all_units = document.get("break_type") == "all_units"
        self.pay_up = "pay_up" in document
        self.dense, self.least, self.grid, self.cent = (
            decimal(document.get(field, "0"))
            for field in ("kg_per_m3", "minimum_charge", "round_up_to", "round_money")
        )
        self.more = decimal(document.get("surcharge_percent", "0"))
        flat = not (self.least or self.grid or self.cent)
        self.even = flat and len({rate for _, rate in self.breaks}) == 1

    def measure(self, network: Network, load: list[tuple[int, Fraction]]) -> Fraction:
        """Return how much of the basis goods are, each of them an item and a quantity."""
        names = {"weight": ["weight_kg"], "volume": ["volume_m3"]}
        basis = self.document["basis"]
        fields = ["weight_kg", "volume_m3"] if self.dense else names.get(basis, [basis])
        sums = []
        for field in fields:
            amounts = [(network.measure(at, field), quantity) for at, quantity in load]
            if any(per is None for per, _ in amounts):
                raise Unusable(f"an item cannot be charged by {self.id!r}")
            sums.append(sum((per * quantity for per, quantity in amounts), Fraction(0)))
        return max(sums[0], sums[1] * self.dense) if self.dense else sums[0]

    def parts(self, charged: Fraction) -> list[Parted]:
        """Return what is paid at which rate, as (from, quantity, rate)."""
        below = [at for at, (start, _) in enumerate(self.breaks) if start < charged]
        if not self.all_units:
            ends = [start for start, _ in self.breaks[1:]] + [charged]
            pairs = [(self.breaks[at], min(ends[at], charged)) for at in below]
            return [(start, end - start, rate) for (start, rate), end in pairs]
        reached = [one for one in self.breaks if one[0] <= charged][-1]
        best = (reached[0], charged, reached[1])
        if self.pay_up:
            for start, rate in self.breaks:
                if max(start, charged) * rate < best[1] * best[2]:
                    best = (start, max(start, charged), rate)
        return [best]

    def price(
        self, measured: Fraction
    ) -> tuple[list[tuple[Fraction, Fraction, Fraction]], Fraction]:
        """Return what a shipment pays at which rate, and in all, in the tariff's currency."""
        if not measured:
            return [], Fraction(0)
        charged = -(-measured // self.grid) * self.grid if self.grid else measured
        parts = self.parts(charged)
        base = sum((quantity * rate for _, quantity, rate in parts), Fraction(0))
        due = max(base, self.least) * (1 + self.more / 100)
        if self.cent:
            due = (due / self.cent + Fraction(1, 2)) // 1 * self.cent
        return parts, due

    def turns(self) -> set[Fraction]:
        """Return the measures at which another rate, the minimum or paying up begins or ends."""
        found = {start for start, _ in self.breaks[1:]}
        for start, rate in self.breaks:
            if rate and self.all_units:
                found.add(self.least / rate)
                found |= {other * dear / rate for other, dear in self.breaks if self.pay_up}
            elif rate:
                base = sum(each * own for at, each, own in self.parts(start) if at < start)
                found.add(start + (self.least - base) / rate)
        return {turn for turn in found if turn > 0}

    def only_rises(self, of_step: Fraction) -> bool:
        """Return whether no step costs less than the one before it.

        Between two turns the price is straight, so that only steps around a turn are looked at; at
        a turn itself it can jump.
        """
        if not of_step:
            return True
        if self.grid and (of_step / self.grid).denominator != 1:
            return False
        near = {0} | {turn // of_step + by for turn in self.turns() for by in (-2, -1, 0)}
        for count in (count for count in near if count >= 0):
            first, second, third = (self.price((count + by) * of_step)[1] for by in (0, 1, 2))
            if third - second < second - first:
                return False
            if self.cent and not self._is_exact(count, of_step):
                return False
        return True

    def _is_exact(self, count: int, of_step: Fraction) -> bool:
        """Return whether rounding leaves the price of some steps, and of the next two, as it is."""
        for by in (0, 1, 2):
            measured = (count + by) * of_step
            base = sum((each * rate for _, each, rate in self.parts(measured)), Fraction(0))
            due = max(base, self.least) * (1 + self.more / 100) if measured else Fraction(0)
            if (due / self.cent).denominator != 1:
                return False
        return True


def read_charges(text: str, item_ids: set[str], known: set[str | None]) -> list[dict[str, Any]]:
    """Return the charges of a lane, their numbers read."""
    charges: list[dict[str, Any]] = parse_canonical(text.encode())
    need(isinstance(charges, list), "charges are not an array")
    need(charges, "charges are an empty array")
    for charge in charges:
        need(isinstance(charge, dict), "not a charge")
        field = "percent" if charge.get("basis") == "value" else "rate"
        need({"name", "basis", field} <= set(charge), "a charge lacks something")
        allowed = {"name", "basis", field, "items"}
        allowed |= {"currency"} if field == "rate" else set()
        need(set(charge) <= allowed, "other fields of a charge")
        need(all(isinstance(charge[f], str) and charge[f] for f in ("name", "basis")), "a charge")
        charge["amount"] = decimal(charge[field])
        need(charge["amount"] >= 0, "a charge below 0")
        need(charge.get("currency") in known, "a charge in another currency")
        need(charge.get("currency", "") is not None, "a charge in no currency")
        if "items" in charge:
            need(set(filled_texts(charge["items"])) <= item_ids, "a charge of unknown items")
    need(rises([charge["name"].encode() for charge in charges]), "charges are not sorted")
    return charges


def day_number(text: str) -> int:
    """Return the day of a date, or of the date with which an instant begins."""
    try:
        return dt.date.fromisoformat(text[:10]).toordinal()
    except ValueError:
        raise Bad("not a date") from None


def day_text(day: int) -> str:
    """Return the date of a day."""
    return dt.date.fromordinal(day).isoformat()


MOMENT = re.compile(
    "([0-9]{4}-[0-9]{2}-[0-9]{2}T[0-9]{2}:[0-9]{2}:[0-9]{2})(?:[.]([0-9]{0,8}[1-9]))?"
    "(Z|[+-][0-9]{2}:[0-9]{2})"
)


def instant(text: Value) -> tuple[dt.datetime, str]:
    """Return a point in time (RFC 3339) to compare: its whole second, and the digits below."""
    match = MOMENT.fullmatch(text) if isinstance(text, str) else None
    if match is None:
        raise Bad("not a point in time")
    try:
        moment = dt.datetime.fromisoformat(match[1] + match[3].replace("Z", "+00:00"))
        return moment.astimezone(dt.timezone.utc), match[2] or ""  # noqa: UP017 - Python 3.9
    except (ValueError, OverflowError):
        raise Bad("not a point in time") from None


def read_head(data: bytes) -> dict[str, Any]:
    """Return the head of the network, its items and sites read."""
    head: dict[str, Any] = parse_canonical(data)
    need(isinstance(head, dict), "the head is not an object")
    texts = {"name", "currency", "cut_off", "planned_at", "release_by"}
    texts.add("shortage_measure")
    fields = {"format", "periods", "storage", "rules", "extra", "exchange_rates"}
    fields |= {"tariffs", "items", "sites", "tables"}
    need(set(head) <= fields | texts, "other fields in the head")
    need(is_whole(head.get("format")) and head["format"] == 1, "another format")
    need(all(isinstance(head.get(field, ""), str) for field in texts), "a field is not text")
    need(re.fullmatch("[A-Z]{3}", head.get("currency", "")), "no currency")
    instant(head.get("cut_off"))
    if "planned_at" in head:
        instant(head["planned_at"])
    if "periods" in head:
        need(all(map(is_date, filled_texts(head["periods"]))), "a period is no date")
    need(all(isinstance(head.get(f), list) for f in ("items", "sites", "rules")), "no arrays")
    if "extra" in head:
        text_members(head["extra"])
    head["worth"] = read_exchange_rates(head)
    read_tariffs(head)
    for rule in head["rules"]:
        read_rule(rule)
    need(rises([rule["id"].encode() for rule in head["rules"]]), "rules are not sorted")
    for item in head["items"]:
        read_item(item)
    for site in head["sites"]:
        read_site(site, {item["id"] for item in head["items"]})
    for things in (head["items"], head["sites"]):
        need(rises([thing["id"].encode() for thing in things]), "ids are not sorted")
    if "storage" in head:
        read_storage(head)
    need(isinstance(head.get("tables"), dict) and set(head["tables"]) == set(COLUMNS), "no tables")
    return head


class Decimals:
    """A column of decimals: whole numbers, the power of ten below them, and which are there."""

    def __init__(self, numbers: array[int], power: int, absent: bytes | None) -> None:
        """Keep the parts; ``absent`` is a byte for each row, or None where all are there."""
        self.numbers, self.power, self.absent = numbers, power, absent

    def has(self, row: int) -> bool:
        """Return whether the row has a value."""
        return self.absent is None or not self.absent[row]

    def __getitem__(self, row: int) -> Value:
        """Return the value of a row, None where there is none."""
        return Fraction(self.numbers[row], self.power) if self.has(row) else None


class Texts:
    """A column of text: the distinct texts, and for each row a position or -1."""

    def __init__(self, codes: array[int], values: list[str]) -> None:
        """Keep the parts."""
        self.codes, self.values = codes, values

    def __getitem__(self, row: int) -> Value:
        """Return the text of a row, None where there is none."""
        return self.values[self.codes[row]] if self.codes[row] >= 0 else None


def numbers_of(data: bytes, kind: str, rows: int) -> array[int]:
    """Return whole numbers of 4 (kind i) or 8 (kind q) bytes, little endian."""
    numbers: array[int] = array(kind)
    need(len(data) == rows * numbers.itemsize, "a column of another length")
    numbers.frombytes(data)
    if sys.byteorder == "big":
        numbers.byteswap()
    return numbers


def records_of(data: bytes, at: int, count: int) -> tuple[list[bytes], int]:
    """Return ``count`` length-prefixed texts that start at ``at``, and where they end."""
    texts = []
    for _ in range(count):
        start = at + 4
        end = start + int.from_bytes(data[at:start], "little")
        need(len(data) >= start and end <= len(data), "a text is cut off")
        texts.append(data[start:end])
        at = end
    return texts, at


def utf8(data: bytes) -> str:
    """Return the text of bytes."""
    try:
        return data.decode("utf-8")
    except UnicodeDecodeError:
        raise Bad("not UTF-8") from None


def read_column(
    data: bytes, kind: str, rows: int, described: dict[str, Any], counts: dict[str, int]
) -> tuple[Any, dict[str, Any]]:
    """Return a column, and how the head has to describe it."""
    if kind == "decimal":
        return read_decimals(data, rows, described)
    if kind == "texts":
        need(len(data) >= 4, "a column without a count")
        count = int.from_bytes(data[:4], "little")
        need(1 <= count <= rows, "more texts than rows")
        texts, at = records_of(data, 4, count)
        values = [utf8(text) for text in texts]
        need(rises(values), "texts are not sorted")
        codes = numbers_of(data[at:], "i", rows)
        need(set(codes) | {-1} == set(range(-1, count)), "texts and codes do not fit")
        return Texts(codes, values), {"type": kind}
    if kind == "text":
        texts, at = records_of(data, 0, rows)
        need(at == len(data), "bytes are left over")
        for text in texts:
            need(len(text) <= 256 and (not text or min(text) >= 32), "not an id")
            utf8(text)
        need(any(texts), "a column of nothing")
        return texts, {"type": kind}
    codes = numbers_of(data, "i", rows)
    if kind == "small":
        need(min(codes) >= 0 and 0 < max(codes) <= 9, "out of range")
        return codes, {"type": kind}
    need(min(codes) >= -1 and 0 <= max(codes) < counts[kind], "out of range")
    return codes, {"type": "code", "of": kind}


def read_decimals(
    data: bytes, rows: int, described: dict[str, Any]
) -> tuple[Decimals, dict[str, Any]]:
    """Return a column of decimals, and how the head has to describe it."""
    power: Value = described.get("exponent")
    nulls = described.get("nulls", False)
    need(is_whole(power) and 0 <= power <= 6, "not an exponent")
    numbers = numbers_of(data[: 8 * rows], "q", rows)
    absent = None
    if nulls:
        bits = data[8 * rows :]
        need(len(bits) == (rows + 7) // 8, "a bitmap of another length")
        absent = bytes(bits[row >> 3] >> (row & 7) & 1 for row in range(8 * len(bits)))
        need(not any(absent[rows:]) and 0 < sum(absent) < rows, "a bitmap that is not needed")
        need(not any(map(int.__and__, numbers, map(int.__neg__, absent))), "absent, but not 0")
    else:
        need(len(data) == 8 * rows, "a column of another length")
    need(min(numbers) > -(2**62) and max(numbers) < 2**62, "a number out of range")
    need(power == 0 or any(number % 10 for number in numbers), "not the least exponent")
    expected: dict[str, Any] = {"type": "decimal", "exponent": power}
    if nulls:
        expected["nulls"] = True
    return Decimals(numbers, 10**power, absent), expected


def read_table(
    name: str, table: Value, entries: dict[str, bytes], counts: dict[str, int], used: set[str]
) -> dict[str, Any]:
    """Return the columns of a table, absent ones made up, and the number of rows."""
    need(isinstance(table, dict) and set(table) == {"rows", "columns"}, "not a table")
    rows, described = table["rows"], table["columns"]
    need(is_whole(rows) and 0 <= rows < 2**31 and isinstance(described, dict), "not a table")
    need(rows or not described, "a table without rows has columns")
    columns: dict[str, Any] = {"rows": rows}
    known = [re.split("([!:])", part) for part in COLUMNS[name].split()]
    need(set(described) <= {column for column, _, _ in known}, "an unknown column")
    for column, mark, _ in known:
        need(column in described or mark != "!" or not rows, column + " is missing")
    for column, says in described.items():
        data = entries.get(f"network/{name}/{column}", b"")
        need(isinstance(says, dict) and says.get("nulls", True) is True, "not a column")
        need(sha256(data) == says.get("digest"), "another digest")
        # Each kind has four bytes or more in a row, so that the file bounds the number of rows.
        need(len(data) >= 4 * rows, "a column is shorter than its table")
        used.add(f"network/{name}/{column}")
    for column, mark, kind in known:
        if column not in described:
            columns[column] = absent_column(kind, rows)
            continue
        says = described[column]
        data = entries[f"network/{name}/{column}"]
        values, expected = read_column(data, kind, rows, says, counts)
        # 1 and true are equal in Python, but not here.
        exact = {key: (type(value), value) for key, value in says.items() if key != "digest"}
        need(exact == {key: (type(v), v) for key, v in expected.items()}, "described otherwise")
        if mark == "!":
            need(is_complete(values, kind), "a row without " + column)
        columns[column] = values
    return columns


def absent_column(kind: str, rows: int) -> Value:
    """Return a column in which every value is absent."""
    if kind == "decimal":
        return Decimals(array("q", bytes(8 * rows)), 1, b"\x01" * rows)
    if kind == "texts":
        return Texts(array("i", [-1]) * rows, [])
    if kind == "text":
        return [b""] * rows
    return array("i", [0 if kind == "small" else -1]) * rows


def is_complete(values: Value, kind: str) -> bool:
    """Return whether every row of a column has a value."""
    if kind == "decimal":
        return values.absent is None
    if kind == "text":
        return all(values)
    least: int = min(values.codes if kind == "texts" else values)
    return least >= 0


class Network:
    """The network: head fields, items, sites, and three tables of columns."""

    def __init__(self, entries: dict[str, bytes]) -> None:
        """Read the entries of a network; Bad unless they are in normal form."""
        head = read_head(entries.get("network/head.json", b""))
        self.head, self.items, self.sites = head, head["items"], head["sites"]
        counts = {"items": len(self.items), "sites": len(self.sites)}
        used = {"network/head.json"}
        self.supply, self.demand, self.lanes = (
            read_table(name, head["tables"][name], entries, counts, used)
            for name in ("supply", "demand", "lanes")
        )
        need(used == set(entries), "entries that the head does not name")
        self.site_at = {site["id"]: at for at, site in enumerate(self.sites)}
        self.item_at = {item["id"]: at for at, item in enumerate(self.items)}
        self.passing = ["cross_dock" in site["roles"] for site in self.sites]
        self.worth: dict[str | None, Fraction] = head["worth"]
        self.held: dict[tuple[str, int], Tariff | None] = {}
        for table in (self.supply, self.lanes):
            need(set(table["currency"].values) <= set(self.worth), "a currency without a rate")
        self.charges = {
            text: read_charges(text, set(self.item_at), set(self.worth))
            for text in self.lanes["charges"].values
        }
        self._check_supply()
        self._check_demand()
        self._check_lanes()
        self.lane_names = LaneNames(self)
        self._count_days()
        self._rows: dict[str, dict[int, list[int]]] = {}

    def _of(self, table: dict[str, Any], name: str, item: int) -> list[int]:
        """Return the rows of a table that are of one item."""
        if name not in self._rows:
            rows: dict[int, list[int]] = defaultdict(list)
            for row, own in enumerate(table["item"]):
                rows[own].append(row)
            self._rows[name] = dict(rows)
        return self._rows[name].get(item, [])

    def _count_days(self) -> None:
        """Put movements, lanes on a day of departure, in the place of lanes.

        From here on ``lanes`` has a row for each of them; ``lane_of`` is the lane that it is of.
        ``departs`` and ``arrives`` are days, None in a network that says nothing of dates.
        """
        lanes, demand = self.lanes, self.demand
        self.stated = lanes
        self.today = day_number(self.head["cut_off"])
        self.lane_of: Any = range(lanes["rows"])
        self.departs: Any = None
        self.arrives: Any = None
        named = [self.supply["available_from"]]
        named += [demand[column] for column in ("earliest", "due", "latest")]
        named += [lanes[column] for column in ("closes", "departs", "arrives")]
        transit = lanes["transit_days"]
        self.dated = (
            "periods" in self.head
            or any(column.values for column in named)
            or any(map(transit.has, range(lanes["rows"])))
        )
        if not self.dated:
            return
        stated = [self.head["cut_off"], *self.head.get("periods", ())]
        stated += [text for name in ("closes", "departs", "arrives") for text in lanes[name].values]
        need(all(text[:4] <= "2200" for text in stated), "a date beyond the calendar")
        leaving = self._leaving_days()
        self.lane_of, self.departs, self.arrives = [], array("q"), array("q")
        for row in range(lanes["rows"]):
            departs, arrives = lanes["departs"][row], lanes["arrives"][row]
            days = [day_number(departs)] if departs else leaving(lanes["origin"][row])
            for day in days:
                self.lane_of.append(row)
                self.departs.append(day)
                self.arrives.append(day_number(arrives) if arrives else day + transit.numbers[row])
        if self.lane_of != list(range(lanes["rows"])):
            self.lanes = {
                name: column if name == "rows" else taken(column, self.lane_of)
                for name, column in lanes.items()
            }
            self.lanes["rows"] = len(self.lane_of)
        self.movements = {
            pair: at
            for at, pair in enumerate(zip(self.lane_of, self.departs))  # noqa: B905 - Python 3.9
        }

    def _leaving_days(self) -> Any:  # noqa: ANN401, C901 - a function; one argument, from top to bottom
        """Return what tells the days on which lanes without a departure leave a site.

        They leave on the periods from today on, or today; and a cross-dock when goods arrive
        there (if there are periods: on those of them), which is followed from dock to dock as many
        times as there are cross-docks.
        """
        lanes = self.lanes
        periods = None
        if "periods" in self.head:
            periods = {day for day in map(day_number, self.head["periods"]) if day >= self.today}
        usual = sorted(periods) if periods is not None else [self.today]
        stocked = {
            site
            for site, quantity in zip(self.supply["site"], self.supply["quantity"].numbers)  # noqa: B905 - Python 3.9
            if quantity > 0
        }
        if periods is not None:
            # What stays overnight leaves on the next of them.
            stocked |= {site for site in range(len(self.sites)) if self.stores(site, None)}
        came: dict[int, set[int]] = defaultdict(set)
        onward = set()
        for row in range(lanes["rows"]):
            start, end = lanes["origin"][row], lanes["destination"][row]
            if not self.passing[end]:
                continue
            departs, arrives = lanes["departs"][row], lanes["arrives"][row]
            transit = lanes["transit_days"].numbers[row]
            if departs:
                day = day_number(arrives) if arrives else day_number(departs) + transit
                came[end].add(day)
                continue
            if not self.passing[start] or start in stocked:
                came[end].update(day + transit for day in usual)
            if self.passing[start]:
                onward.add((start, end, transit))
        for _ in range(sum(self.passing)):
            new = {
                (end, day + transit)
                for start, end, transit in onward
                for day in came[start]
                if periods is None or day in periods
            }
            if all(day in came[end] for end, day in new):
                break
            for end, day in new:
                came[end].add(day)

        def leaving(site: int) -> list[int]:
            if not self.passing[site]:
                return usual
            days = {day for day in came[site] if periods is None or day in periods}
            if site in stocked or not came[site]:
                days.update(usual)
            return sorted(days)

        return leaving

    def stores(self, site: int, item: int | None) -> bool:
        """Return whether goods of an item (None: of any) may stay overnight at a site."""
        name = None if item is None else self.items[item]["id"]
        return any(
            row["site"] == self.sites[site]["id"]
            and (name is None or row.get("item", name) == name)
            for row in self.head.get("storage", ())
        )

    def movement(self, name: str, departs: str | None) -> int:
        """Return the row of a lane on a date of departure (None: without dates), -1 if none."""
        row = self.lane_names.row(name)
        if not self.dated:
            return row if departs is None else -1
        if departs is None or not is_date(departs):
            return -1
        return self.movements.get((row, day_number(departs)), -1)

    def lane_name(self, row: int) -> str:
        """Return the name of the lane of a movement."""
        return self.lane_names.name(self.lane_of[row])

    def dates_of(self, row: int) -> dict[str, str | None]:
        """Return how the dates of a movement are written; nothing in a network without dates.

        Goods that are used where they are drawn (row -1) depart and arrive never.
        """
        if not self.dated:
            return {}
        if row < 0:
            return {"departs": None, "arrives": None}
        return {"departs": day_text(self.departs[row]), "arrives": day_text(self.arrives[row])}

    def lanes_of(self, item: int) -> list[int]:
        """Return the lanes, as they were stated, of one item only, or (-1) of any item."""
        return self._of(self.stated, "lanes", item)

    def supply_of(self, item: int) -> list[int]:
        """Return the supply rows of an item."""
        return self._of(self.supply, "supply", item)

    def order_lines_of(self, item: int) -> list[int]:
        """Return the order lines of an item."""
        return self._of(self.demand, "demand", item)

    def units(self, at: int, unit: str) -> Value:
        """Return how many units of an item one ``unit`` is, None if it says nothing of it."""
        item = self.items[at]
        if unit == item["unit"]:
            return Fraction(1)
        if unit in item["packs"]:
            return item["packs"][unit]
        row, own = STANDARD_UNITS.get(unit), STANDARD_UNITS.get(item["unit"])
        if row is None or own is None or row[0] != own[0]:
            return None
        return row[1] / own[1]

    def measure(self, at: int, measure: str) -> Value:
        """Return how much of a measure one unit of an item is, None if it does not say."""
        item = self.items[at]
        if measure == "unit":
            return Fraction(1)
        if measure in ("weight_kg", "volume_m3"):
            return item.get(measure)
        return 1 / item["packs"][measure] if measure in item["packs"] else None

    def tariff(self, row: int) -> Tariff | None:
        """Return the tariff of a lane, None if it has a unit cost; Unusable if none holds."""
        name = self.lanes["tariff"][row]
        if name is None:
            return None
        day = self.today if self.departs is None else self.departs[row]
        if (name, day) not in self.held:
            on, found = day_text(day), None
            for tariff in self.head["read_tariffs"]:
                if tariff.id == name and tariff.starts <= on <= tariff.ends:
                    found = tariff
            self.held[name, day] = found
        if self.held[name, day] is None:
            raise Unusable(f"no tariff {name!r} holds on a day of departure")
        return self.held[name, day]

    def check_tariffs(self) -> None:
        """Raise Unusable unless tariffs only get dearer, and items do not meet in them."""
        users: dict[int, int] = defaultdict(int)
        kinds: dict[int, set[bool]] = defaultdict(set)
        rising: dict[tuple[Tariff, int], bool] = {}
        lanes = [row for row in range(self.lanes["rows"]) if self.tariff(row)]
        for at in range(len(self.items) if lanes else 0):
            item = self.items[at]
            usable = set(usable_lanes(self, at))
            for row in (row for row in lanes if self.lane_of[row] in usable):
                tariff = self.tariff(row)
                assert tariff is not None  # noqa: S101 - so were they picked
                if (tariff, at) not in rising:
                    of_step = tariff.measure(self, [(at, item["step"])])
                    rising[tariff, at] = tariff.only_rises(of_step)
                if not rising[tariff, at]:
                    raise Unusable(f"steps get cheaper by {tariff.id!r}")
                users[row] += 1
                dense = tariff.dense * item.get("volume_m3", 0) - item.get("weight_kg", 0)
                if tariff.dense and dense:
                    kinds[row].add(dense > 0)
                if users[row] > 1 and not (tariff.even and len(kinds[row]) < 2):
                    raise Unusable(f"several items meet in {tariff.id!r}")

    def charges_on(self, row: int, at: int) -> list[tuple[str, str | None, Fraction]]:
        """Return name, currency and amount of what a lane charges for one unit of an item."""
        item, due = self.items[at], []
        for charge in self.charges.get(self.lanes["charges"][row], ()):
            if item["id"] not in charge.get("items", [item["id"]]):
                continue
            if charge["basis"] == "value":
                per = item["value"] / 100 if "value" in item else None
            else:
                names = {"weight": "weight_kg", "volume": "volume_m3"}
                per = self.measure(at, names.get(charge["basis"], charge["basis"]))
            if per is None:
                raise Unusable(f"item {item['id']!r} cannot be charged {charge['name']}")
            due.append((charge["name"], charge.get("currency"), charge["amount"] * per))
        return due

    def _check_units(self, table: dict[str, Any]) -> None:
        """Check that every row is in a unit of its item, and has a quantity that is not below 0."""
        for item, unit in set(zip(table["item"], table["unit"].codes)):  # noqa: B905 - Python 3.9
            need(self.units(item, table["unit"].values[unit]), "an unknown unit")
        need(not_below_0(table["quantity"]), "a quantity below 0")

    def _check_supply(self) -> None:
        """Check the supply rows."""
        supply = self.supply
        self._check_units(supply)
        for column in ("on_hand", "reserved", "on_hold", "keep_quantity"):
            need(not_below_0(supply[column]), "a quantity below 0")
        kept = [row for row in range(supply["rows"]) if supply["keep_priority"][row]]
        has = [row for row in range(supply["rows"]) if supply["keep_quantity"].has(row)]
        need(kept == has, "kept stock without its priority")
        pairs = {(supply["site"][row], supply["item"][row]) for row in kept}
        need(len(pairs) == len(kept), "stock is kept twice at one site")
        for text in supply["extra"].values:
            text_members(parse_canonical(text.encode()))
        need(all(map(is_date, supply["available_from"].values)), "not a date")
        keys = [self._supply_key(row) for row in range(supply["rows"])]
        need(keys == sorted(keys), "supply is not sorted")

    def _supply_key(self, row: int) -> Key:
        """Return what supply is sorted by."""
        supply = self.supply
        site, item = supply["site"][row], supply["item"][row]
        cost = (supply["unit_cost"][row] or 0) / self.units(item, supply["unit"][row])
        cost *= self.worth[supply["currency"][row]]
        date = supply["best_before"].codes[row]
        rest = []
        for (
            column
        ) in "quantity unit unit_cost on_hand reserved on_hold as_of keep_quantity".split():
            values = supply[column]
            if isinstance(values, Texts):
                rest.append(values.codes[row])
            else:
                rest += (values.has(row), values.numbers[row])
        rest += (supply["keep_priority"][row], supply["extra"].codes[row])
        currency, lot = supply["currency"].codes[row], supply["lot"].codes[row]
        start = supply["available_from"].codes[row]
        return (site, item, start, cost, currency, date < 0, date, lot, *rest)

    def _check_demand(self) -> None:
        """Check the order lines."""
        demand = self.demand
        self._check_units(demand)
        need(rises(demand["reference"]), "order lines are not sorted")
        need(not_below_0(demand["shortage_cost"]), "a cost below 0")
        need(not_below_0(demand["worth_at_most"]), "a cost below 0")
        need(not_below_0(demand["late_cost_per_day"]), "a cost below 0")
        for column in ("earliest", "due", "latest"):
            need(all(map(is_date, demand[column].values)), "not a date")
        for row in range(demand["rows"]):
            ways = (
                demand["priority"][row] > 0,
                demand["shortage_cost"].has(row),
                demand["worth_at_most"].has(row),
            )
            need(sum(ways) <= 1, "an order line with two kinds of importance")
            paid = demand["late_cost_per_day"].has(row)
            need(not paid or demand["due"][row], "a late cost without a date")
        self.origins = [
            filled_texts(parse_canonical(text.encode())) for text in demand["origins"].values
        ]
        for origins in self.origins:
            need(set(origins) <= set(self.site_at), "an unknown site in origins")
        for text in demand["tags"].values:
            filled_texts(parse_canonical(text.encode()))
        for text in demand["extra"].values:
            text_members(parse_canonical(text.encode()))

    def _check_lanes(self) -> None:
        """Check the lanes."""
        lanes = self.lanes
        need(set(lanes["per"].values) <= {"item", "together"}, "an unknown per")
        need(not_below_0(lanes["capacity"]), "a capacity below 0")
        need(not_below_0(lanes["transit_days"]), "days below 0")
        need(lanes["transit_days"].power == 1, "a part of a day")
        need(max(lanes["transit_days"].numbers, default=0) <= 366, "too many days")
        for column in ("closes", "departs", "arrives"):
            for text in lanes[column].values:
                instant(text)
        must = lanes["must_ship"]
        for row in range(lanes["rows"]):
            need(lanes["origin"][row] != lanes["destination"][row], "a lane to where it starts")
            need(must.numbers[row] > 0 or not must.has(row), "a must-ship of 0")
            ends = (lanes["closes"][row], lanes["arrives"][row])
            need(lanes["departs"][row] or ends == (None, None), "no departure")
            twice = lanes["transit_days"].has(row) and ends[1]
            need(not twice, "two arrivals of a lane")
            by_tariff = lanes["tariff"].codes[row] >= 0
            need(lanes["unit_cost"].has(row) != by_tariff, "a lane without one cost")
            need(not by_tariff or lanes["currency"].codes[row] < 0, "a tariff in a currency")
        known = {tariff["id"] for tariff in self.head.get("tariffs", ())}
        need(set(lanes["tariff"].values) <= known, "an unknown tariff")
        named = [name for name in lanes["id"] if name]
        need(len(set(named)) == len(named), "a lane id occurs twice")
        for item, code in set(zip(lanes["item"], lanes["measure"].codes)):  # noqa: B905 - Python 3.9
            measure = lanes["measure"].values[code]
            need(item < 0 or self.measure(item, measure), "an unknown measure")
        for text in lanes["tags"].values:
            filled_texts(parse_canonical(text.encode()))
        for text in lanes["extra"].values:
            text_members(parse_canonical(text.encode()))
        same_ends = (lanes["origin"], lanes["destination"], lanes["item"])
        for row in range(1, lanes["rows"]):
            before = tuple(column[row - 1] for column in same_ends)
            here = tuple(column[row] for column in same_ends)
            same = before == here and self._lane_key(row - 1) <= self._lane_key(row)
            need(before < here or same, "lanes are not sorted")

    def _lane_key(self, row: int) -> Key:
        """Return what lanes between the same sites are sorted by."""
        lanes, capacity = self.lanes, self.lanes["capacity"]
        codes = [lanes[column].codes[row] for column in ("tags", "measure", "per")]
        transit = lanes["transit_days"]
        codes.append(transit.numbers[row] if transit.has(row) else -1)
        last = ("departs", "arrives", "closes", "extra", "currency", "charges", "tariff")
        codes += [lanes[column].codes[row] for column in last]
        return (
            lanes["id"][row],
            lanes["carrier"].codes[row],
            lanes["unit_cost"].numbers[row],
            lanes["must_ship"].numbers[row],
            not capacity.has(row),
            capacity.numbers[row],
            *codes,
        )


def not_below_0(column: Decimals) -> bool:
    """Return whether no decimal of a column is below 0."""
    return not len(column.numbers) or min(column.numbers) >= 0


def taken(column: Value, rows: list[int]) -> Value:
    """Return some rows of a column."""
    if isinstance(column, Decimals):
        absent = column.absent
        return Decimals(
            array("q", (column.numbers[row] for row in rows)),
            column.power,
            None if absent is None else bytes(absent[row] for row in rows),
        )
    if isinstance(column, Texts):
        return Texts(array("i", (column.codes[row] for row in rows)), column.values)
    if isinstance(column, list):
        return [column[row] for row in rows]
    return array("i", (column[row] for row in rows))


class LaneNames:
    """Lanes by name: the id that was given, or ORIGIN>DESTINATION[>ITEM][#NUMBER]."""

    def __init__(self, network: Network) -> None:
        """Index given ids and the ends of lanes."""
        self.network = network
        self.lanes = lanes = network.lanes
        self.given = {name.decode(): row for row, name in enumerate(lanes["id"]) if name}
        self.sites = {encoded(site["id"]): at for at, site in enumerate(network.sites)}
        self.items = {encoded(item["id"]): at for at, item in enumerate(network.items)}
        self.ends: dict[Key, int] | None = None

    def row(self, name: str) -> int:
        """Return the row of a lane, -1 if there is none of that name."""
        if name in self.given:
            return self.given[name]
        match = re.fullmatch(
            "([^#>]*)>([^#>]*)(?:>([^#>]*))?(?:#([1-9][0-9]{0,17}))?", name, re.DOTALL
        )
        if not match or match[4] == "1":
            return -1
        ends = (
            self.sites.get(match[1], -2),
            self.sites.get(match[2], -2),
            -1 if match[3] is None else self.items.get(match[3], -2),
        )
        first = self.first_row(ends)
        row = first + int(match[4] or 1) - 1
        lanes = self.lanes
        columns = (lanes["origin"], lanes["destination"], lanes["item"])
        if first < 0 or row >= lanes["rows"] or lanes["id"][row]:
            return -1
        return row if tuple(column[row] for column in columns) == ends else -1

    def first_row(self, ends: Key) -> int:
        """Return the first lane with these ends, -1 if there is none."""
        if self.ends is None:
            lanes = self.lanes
            self.ends = {}
            keys = zip(lanes["origin"], lanes["destination"], lanes["item"])  # noqa: B905 - Python 3.9
            for row, key in enumerate(keys):
                self.ends.setdefault(key, row)
        return self.ends.get(ends, -1)

    def name(self, row: int) -> str:
        """Return the name of a lane."""
        network, lanes = self.network, self.lanes
        given: bytes = lanes["id"][row]
        if given:
            return given.decode()
        ends = (lanes["origin"][row], lanes["destination"][row], lanes["item"][row])
        parts = [network.sites[ends[0]]["id"], network.sites[ends[1]]["id"]]
        if ends[2] >= 0:
            parts.append(network.items[ends[2]]["id"])
        number = row - self.first_row(ends)
        return ">".join(map(encoded, parts)) + (f"#{number + 1}" if number else "")


def encoded(name: str) -> str:
    """Return an id as it stands in the name of a lane."""
    return name.replace("%", "%25").replace(">", "%3E").replace("#", "%23")


# ------------------------------------------------------------------ 3. options and shapes


def read_options(data: bytes) -> dict[str, Any]:
    """Return the options of the run."""
    value = parse_canonical(data)
    fields = (
        "shortages worth_at_most demand_rounding bad_rows label plan_for deadline_seconds "
        "maximum_age_minutes"
    )
    need(isinstance(value, dict) and set(value) == set(fields.split()), "other options")
    options: dict[str, Any] = value
    need(options["shortages"] in ("allow", "forbid"), "shortages")
    need(options["demand_rounding"] in ("refuse", "up", "down"), "demand_rounding")
    need(options["bad_rows"] in ("refuse", "set_aside"), "bad_rows")
    worth, label, day = (options[field] for field in ("worth_at_most", "label", "plan_for"))
    if worth is not None:
        options["worth_at_most"] = decimal(worth)
        need(worth[0] != "-" and int(worth.replace(".", "")) < 2**62, "worth_at_most")
    if label is not None:
        need(isinstance(label, str) and 1 <= len(label) <= 200, "label")
        need(not re.search("[\x00-\x1f\x7f-\x9f]", label), "label")
    need(day is None or (isinstance(day, str) and is_date(day)), "plan_for")
    need(is_whole(options["deadline_seconds"]), "deadline_seconds")
    need(1 <= options["deadline_seconds"] <= 900, "deadline_seconds")
    age = options["maximum_age_minutes"]
    need(age is None or (is_whole(age) and 0 <= age <= 10 * 366 * 24 * 60), "maximum_age_minutes")
    return options


DIGEST = re.compile("sha-256:[0-9a-f]{64}")
AMOUNT = re.compile("-?(?:0|[1-9][0-9]*)(?:[.][0-9]+)?|-?[1-9][0-9]*/[1-9][0-9]*")
WHOLE = re.compile("0|-?[1-9][0-9]*")

# The kinds of values. "?" allows null; a list of one kind is an array of it; a dict is an object
# with exactly these keys ("?key" may be absent); a tuple lists the values that are allowed.
KINDS: dict[str, Any] = {
    "text": lambda value: isinstance(value, str),
    "flag": lambda value: isinstance(value, bool),
    "count": lambda value: is_whole(value) and 0 <= value < 2**53,
    "amount": lambda value: is_number(value, AMOUNT),
    "known": lambda value: value == "unknown" or is_number(value, AMOUNT),
    "whole": lambda value: is_number(value, WHOLE),
    "digest": lambda value: isinstance(value, str) and DIGEST.fullmatch(value) is not None,
    "object": lambda value: isinstance(value, dict),
    "texts": lambda value: (
        isinstance(value, dict) and all(isinstance(text, str) for text in value.values())
    ),
}


def is_number(value: object, form: re.Pattern[str]) -> bool:
    """Return whether a value is a text of one of the forms of numbers."""
    return isinstance(value, str) and len(value) <= 1000 and form.fullmatch(value) is not None


def keys(text: str, kind: Value) -> dict[str, Any]:
    """Return a shape in which all the keys have one kind."""
    return dict.fromkeys(text.split(), kind)


def has_shape(value: Value, shape: Value) -> bool:  # noqa: PLR0911 - one return for each kind of shape
    """Return whether a value of JSON has a shape."""
    if isinstance(shape, str):
        return (value is None and shape[0] == "?") or KINDS[shape.lstrip("?")](value)
    if isinstance(shape, tuple):
        return any(type(value) is type(one) and value == one for one in shape)
    if isinstance(shape, list):
        if not isinstance(value, list):
            return False
        return not value or (shape != [] and all(has_shape(one, shape[0]) for one in value))
    if not isinstance(value, dict):
        return False
    allowed = {key.lstrip("?"): one for key, one in shape.items()}
    needed = {key for key in shape if key[0] != "?"}
    if not needed <= set(value) <= set(allowed):
        return False
    return all(has_shape(member, allowed[key]) for key, member in value.items())


METHODS = ("min_cost_flow", "linear_program")
SUMMARY = {
    "format": (1,),
    "feasible": (True,),
    "lower_bound": "amount",
    "gap": "amount",
    "lexicographic": ("proved", "best_found"),
    "solver_bound": (None,),
    "reproducible": "flag",
    "network_digest": "digest",
}
PLAN: dict[str, Any] = {
    "format": (1,),
    "status": ("planned",),
    "method": METHODS,
    "method_reasons": ["text"],
    **keys("name release_by", "?text"),
    **keys("currency cut_off", "text"),
    **keys("network_digest options_digest", "digest"),
    **keys("total_cost total_cost_rounded rounding_difference", "amount"),
    "cost_parts": keys("supply handling transport charges shortage lateness", "amount"),
    "totals": {
        **keys("lines_complete lines_in_part lines_none ?lines_late set_aside", "count"),
        "quantities": [
            {
                **keys("item unit", "text"),
                **keys("wanted served short", "amount"),
                "weight_kg": "known",
            }
        ],
    },
    "plan_lines": [
        {
            "lane": "?text",
            **keys("origin destination item", "text"),
            **keys("?departs ?arrives", "?text"),
            **keys("quantity unit_cost transport_cost supply_cost", "amount"),
            **keys("handling_cost charges cost", "amount"),
            "?stated": {"currency": "text", "transport_cost": "amount"},
            "?charge_parts": [
                {**keys("name ?currency", "text"), **keys("cost ?stated_cost", "amount")}
            ],
        }
    ],
    "?currencies": [
        {
            "currency": "text",
            **keys("as_of source", "?text"),
            **keys("rate per supply transport charges amount converted", "amount"),
        }
    ],
    "order_lines": [
        {
            **keys("reference site item", "text"),
            "order": "?text",
            **keys("quantity served short", "amount"),
            "priority": "?count",
            "sources": [
                {
                    **keys("origin item", "text"),
                    "lot": "?text",
                    "quantity": "amount",
                    "legs": [{"lane": "text", **keys("?departs ?arrives", "text")}],
                    "?arrives": "text",
                }
            ],
            **keys("?earliest ?due ?latest", "text"),
            "?days_late": "count",
            **keys("?shortage_cost ?ordered", "amount"),
            "?tags": ["text"],
            "?extra": "texts",
        }
    ],
    "consignments": [
        {
            **keys("lane origin destination", "text"),
            "carrier": "?text",
            **keys("?departs ?arrives", "text"),
            **keys("pallets weight_kg volume_m3", "known"),
            "cost": "amount",
            "order_references": ["text"],
            "?freight": {
                **keys("tariff basis currency", "text"),
                **keys("version source", "?text"),
                **keys("measured charged rate minimum_charge", "amount"),
                **keys("surcharge_percent amount cost", "amount"),
                "parts": [keys("from quantity rate amount", "amount")],
            },
        }
    ],
    "shortages": [
        {
            "reference": "?text",
            **keys("site item reason", "text"),
            "priority": "?count",
            "quantity": "amount",
            "next_chance": "?text",
            "?outranked_by": "object",
            "?kept": (True,),
        }
    ],
    "site_use": [{**keys("site item", "text"), **keys("available shipped kept left", "amount")}],
    "rules_in_force": [
        {
            **keys("rule id", "text"),
            **keys("note owner", "?text"),
            **keys("applied binding", "flag"),
            "?one_more": [{**keys("site lane", "?text"), "measure": "text", "cost": "amount"}],
        }
    ],
    "set_aside": ["object"],
    "warnings": ["object"],
    "certificate": SUMMARY,
}
NO_PLAN: dict[str, Any] = {
    **{key: shape for key, shape in PLAN.items() if key != "?currencies"},
    "status": ("no_plan",),
    **keys("total_cost total_cost_rounded rounding_difference cost_parts", (None,)),
    "totals": {**PLAN["totals"], "quantities": []},
    **keys("plan_lines order_lines consignments shortages site_use", []),
    "reason": "object",
    "certificate": {
        **SUMMARY,
        "feasible": (False,),
        **keys("lower_bound gap", (None,)),
        "lexicographic": ("no_plan",),
    },
}
CERTIFICATE_HEAD = {
    "format": (1,),
    "method": METHODS,
    **keys("network_digest options_digest", "digest"),
    "currency": "text",
    "versions": "texts",
}
SIDES = ("received", "in", "out", "sent", "demand", "stock", "keep")
TIER_FLOW = {"site": "text", "tier": "count", "quantity": "amount", "?day": "text"}
NODE = {"site": "text", "side": SIDES, "qualifier": "?text", "?day": "text"}
CERTIFICATE = {
    **CERTIFICATE_HEAD,
    **keys("cost_scale total_cost lower_bound gap", "amount"),
    "lexicographic": ("proved", "best_found"),
    "steps": ["object"],
    "items": [
        {
            "item": "text",
            **keys("base ?late_base", "whole"),
            "?stored": [{**keys("site day", "text"), "quantity": "amount"}],
            "draws": [TIER_FLOW],
            "kept": [TIER_FLOW],
            "serves": [
                {
                    **keys("site group", "text"),
                    "from": ("out", "received"),
                    "origin": "?text",
                    "quantity": "amount",
                    "?day": "text",
                }
            ],
            "passes": [{"site": "text", "origin": "?text", "quantity": "amount", "?day": "text"}],
            "shortages": [{"site": "text", "group": "?text", "quantity": "amount"}],
            "prices": [{**NODE, "price": "whole"}],
        }
    ],
    "?coupled": [{"items": ["text"], "proofs": ["?object"]}],
}
PROOF_TOGETHER = {
    "scale": "amount",
    "multipliers": [{**keys("rule site lane", "?text"), "value": "amount"}],
    "caps": [{"priority": "count", "value": "amount"}],
    "prices": [{"item": "text", "nodes": [{**NODE, "price": "whole"}]}],
}
SHORTAGE_STEP = {
    "item": "text",
    "of": ("shortage",),
    "priority": "count",
    **keys("achieved bound", "amount"),
}
COST_STEP = {"item": "text", "of": ("cost", "lateness"), **keys("achieved bound", "amount")}
SHORTAGE_TOGETHER = {
    "items": ["text"],
    "of": ("shortage",),
    "priority": "count",
    "measure": "text",
    **keys("achieved bound", "amount"),
}
COST_TOGETHER = {"items": ["text"], "of": ("cost",), **keys("achieved bound", "amount")}
NO_PLAN_CERTIFICATE = {
    **CERTIFICATE_HEAD,
    **keys("cost_scale total_cost lower_bound gap", (None,)),
    "lexicographic": ("no_plan",),
    "?contradictions": [{"items": ["text"], "proof": "?object"}],
    "cuts": [
        {
            "item": "text",
            "nodes": [NODE],
            "root": "flag",
            **keys("forced_out can_enter", "amount"),
        }
    ],
}


def is_plan(plan: Value) -> bool:
    """Return whether a value has the shape of a plan."""
    without = isinstance(plan, dict) and plan.get("status") == "no_plan"
    return has_shape(plan, NO_PLAN if without else PLAN)


def is_certificate(certificate: Value) -> bool:
    """Return whether a value has the shape of a certificate."""
    if isinstance(certificate, dict) and certificate.get("lexicographic") == "no_plan":
        return has_shape(certificate, NO_PLAN_CERTIFICATE) and all(
            circle["proof"] is None or has_shape(circle["proof"], PROOF_TOGETHER)
            for circle in certificate.get("contradictions", ())
        )
    if not has_shape(certificate, CERTIFICATE):
        return False
    proofs = [proof for circle in certificate.get("coupled", ()) for proof in circle["proofs"]]
    if not all(proof is None or has_shape(proof, PROOF_TOGETHER) for proof in proofs):
        return False
    return all(
        has_shape(step, COST_STEP if step.get("of") in COST_STEP["of"] else SHORTAGE_STEP)
        or has_shape(step, COST_TOGETHER if step.get("of") == "cost" else SHORTAGE_TOGETHER)
        for step in certificate["steps"]
    )


# ------------------------------------------------------------------ 4. the history

EVENT = {
    **keys("tenant stream recorded_at kind actor authentication", "text"),
    "seq": "count",
    "format": (1,),
    "payload_digest": "?digest",
    **keys("previous hash", "digest"),
}
HISTORY = [{"event": EVENT, "payload": "?object", "salt": "?text"}]


def check_history(history: Value, report: Report) -> None:
    """Follow the chain of events."""
    if not has_shape(history, HISTORY):
        report.add("history_malformed", "not a list of events", "history.json")
        return
    chains: dict[tuple[str, str], tuple[int, str]] = {}
    for number, entry in enumerate(history):
        event, place = dict(entry["event"]), f"history/{number}"
        stream = (event["tenant"], event["stream"])
        count, last = chains.get(stream, (0, NOTHING_BEFORE))
        if (event["seq"], event["previous"]) != (count + 1, last):
            report.add("event_chain", "it does not follow the event before it", place)
        stated = event.pop("hash")
        chains[stream] = (event["seq"], stated)
        if sha256(canonical(event)) != stated:
            report.add("event_hash", "the hash is not that of the event", place)
        if not payload_fits(event["payload_digest"], entry["payload"], entry["salt"]):
            report.add("event_payload", "the payload is not that of the event", place)


def payload_fits(stated: str | None, payload: Value, salt: str | None) -> bool:
    """Return whether payload and salt have the digest that an event names."""
    if stated is None or payload is None or salt is None:
        return stated is None and payload is None and salt is None
    if not re.fullmatch("[0-9a-f]{32}", salt):
        return False
    try:
        return sha256(bytes.fromhex(salt) + canonical(payload)) == stated
    except Bad:
        return False


# ------------------------------------------------------------------ 5. the formal network

ROOT = 0
UNLIMITED = None


class Unusable(Exception):  # noqa: N818 - short, and read aloud
    """The network states something that cannot be planned."""


class Rule:
    """A rule in force, and what it picks."""

    def __init__(self, network: Network, rule: dict[str, Any]) -> None:
        """Work out which items, sites and lanes the rule picks."""
        self.rule = rule
        self.kind = rule["rule"]
        items, sites = rule.get("items", {}), rule.get("sites")
        self.items = {at for at, item in enumerate(network.items) if picks(items, item)}
        self.sites: set[int] = set()
        if sites is not None:
            self.sites = {at for at, site in enumerate(network.sites) if picks(sites, site)}
        self.lanes: set[int] = set()
        if self.kind == "closure" and sites is not None:
            ends = zip(network.lanes["origin"], network.lanes["destination"])  # noqa: B905 - 3.9
            self.lanes = {row for row, both in enumerate(ends) if not self.sites.isdisjoint(both)}
        elif "lanes" in rule:
            self.lanes = lanes_picked(network, rule["lanes"])


def picks(selector: dict[str, list[str]], thing: dict[str, Any]) -> bool:
    """Return whether a selector picks a site or an item."""
    has = {"ids": [thing["id"]], "role": thing.get("roles", ()), "tag": thing.get("tags", ())}
    return all(not set(texts).isdisjoint(has[key]) for key, texts in selector.items())


def lanes_picked(network: Network, selector: dict[str, list[str]]) -> set[int]:
    """Return the rows of the lanes that a selector picks."""
    lanes = network.lanes
    rows = set(range(lanes["rows"]))
    for key, texts in selector.items():
        if key == "ids":
            named = {network.lane_names.row(name) for name in texts}
            rows = {row for row in rows if network.lane_of[row] in named}
        elif key in ("origin", "destination"):
            sites = {network.site_at.get(site, -1) for site in texts}
            rows = {row for row in rows if lanes[key][row] in sites}
        elif key == "carrier":
            rows = {row for row in rows if lanes["carrier"][row] in texts}
        else:
            tagged = [not set(texts).isdisjoint(json.loads(tags)) for tags in lanes["tags"].values]
            rows = {row for row in rows if tagged[lanes["tags"].codes[row]] and lanes["tags"][row]}
    return rows


def rules_in_force(network: Network) -> list[Rule]:
    """Return the rules that hold on the local date of the cut-off."""
    day = network.head["cut_off"][:10]
    return [
        Rule(network, rule)
        for rule in network.head["rules"]
        if rule.get("from", day) <= day <= rule.get("until", day)
    ]


def usable_lanes(network: Network, item: int) -> list[int]:
    """Return the lanes that an item can use: its own, and those of any item that help it.

    A lane of any item helps if stock can come to where it starts and is wanted where it leads, or
    behind that, moving on only at cross-docks. An own lane that must ship from a cross-dock wants
    stock there. Closures do not matter.
    """
    lanes = network.stated
    own, general = network.lanes_of(item), network.lanes_of(-1)
    if not general:
        return own
    candidates = sorted(own + general)
    ends = [(lanes["origin"][row], lanes["destination"][row]) for row in candidates]
    wanted = {
        network.demand["site"][row]
        for row in network.order_lines_of(item)
        if network.demand["quantity"].numbers[row] > 0
    }
    forced = {lanes["origin"][row] for row in own if lanes["must_ship"].numbers[row] > 0}
    wanted |= {site for site in forced if network.passing[site]}
    sends = spread(network, stocked(network, item), ends)
    takes = spread(network, wanted, [(end, start) for start, end in ends])
    return [
        row
        for row, (start, end) in zip(candidates, ends)  # noqa: B905 - Python 3.9
        if lanes["item"][row] == item or (start in sends and end in takes)
    ]


def stocked(network: Network, item: int) -> set[int]:
    """Return the sites that have stock of an item."""
    supply = network.supply
    rows = network.supply_of(item)
    return {supply["site"][row] for row in rows if supply["quantity"].numbers[row] > 0}


def spread(network: Network, start: set[int], ends: list[tuple[int, int]]) -> set[int]:
    """Return the start, and each cross-dock that pairs lead to from there, step by step."""
    onward = defaultdict(list)
    for before, after in ends:
        if network.passing[after]:
            onward[before].append(after)
    reached, new = set(start), list(start)
    while new:
        for site in onward.pop(new.pop(), ()):
            if site not in reached:
                reached.add(site)
                new.append(site)
    return reached


class Arc:
    """An arc that is no lane: from a place to another, with limits, money, and what it is for.

    ``high`` is None where there is no limit; ``rank`` is 1 for shortage of the first priority.
    """

    __slots__ = ("days", "head", "high", "key", "kind", "late", "low", "money", "rank", "tail")

    def __init__(  # noqa: PLR0913, PLR0917 - what an arc is
        self,
        kind: str,
        tail: int,
        head: int,
        low: int,
        high: int | None,
        money: Fraction,
        rank: int,
        key: Key,
    ) -> None:
        """Keep the parts."""
        self.kind, self.tail, self.head, self.low, self.high = kind, tail, head, low, high
        self.money, self.rank, self.key = money, rank, key
        # How much of the money is for being late; how many days that is, if it costs none.
        self.late, self.days = Fraction(0), 0


class Tiers:
    """Stock of an item at a site: tiers of one cost and currency, in steps, and rows in them."""

    def __init__(self) -> None:
        """Start with nothing."""
        self.costs: list[Fraction] = []
        self.stated: list[tuple[str | None, Fraction]] = []  # currency, money in it
        self.steps: list[int] = []
        self.since: list[int] = []  # the first day of each tier, 0: any
        self.rows: list[tuple[int, int, str | None]] = []  # tier from 1, steps, lot
        self.keep = self.keep_priority = 0


class Line:
    """An order line in steps: what it wants, and how much it matters."""

    def __init__(self, row: int, site: int, wanted: int, rank: Key) -> None:
        """Keep the parts.

        ``rank`` is priority (0 for money), money, a position of origins, dates, money for lateness.
        """
        self.row, self.site, self.wanted, self.rank = row, site, wanted, rank
        self.priority, self.money, self.origins = rank[:3]
        # Days; None where there is none. The money is for a unit and a day.
        self.earliest, self.due, self.latest, self.late_money = rank[3:]
        self.group = ""


def place_key(site: int, side: str, qualifier: str | None, day: int | None) -> Key:
    """Return what a place is known by; only some have a day."""
    key = (site, side, qualifier)
    return key if day is None else (*key, day_text(day))


def node_key(network: Network, entry: dict[str, Any]) -> Key:
    """Return what the place is known by that a certificate names."""
    key = (network.site_at.get(entry["site"], -1), entry["side"], entry["qualifier"])
    return (*key, entry["day"]) if "day" in entry else key


def g_late(group: Line, day: int) -> int | None:
    """Return how many days late a group is served on a day, None if it may not be then."""
    if day < (group.earliest or 0) or (group.latest is not None and day > group.latest):
        return None
    return max(0, day - group.due) if group.due is not None else 0


class Formal:
    """The formal network of one item: places, lanes between them, and other arcs.

    Goods circulate from the root over stock, lanes and order lines back to the root; what is short
    comes straight from the root. All quantities are in steps of the item.
    """

    def __init__(
        self, network: Network, options: dict[str, Any], rules: list[Rule], item: int
    ) -> None:
        """Build the network; Unusable if it cannot be."""
        self.network, self.options, self.item = network, options, item
        self.name = network.items[item]["id"]
        self.step: Fraction = network.items[item]["step"]
        self.rules = [rule for rule in rules if item in rule.items]
        # Which lanes are of use is not a matter of dates.
        self.usable = usable_lanes(network, item)
        self.rows = self.usable
        if network.dated:
            used = set(self.usable)
            self.rows = [row for row, lane in enumerate(network.lane_of) if lane in used]
        self.amounts = self._measures()
        self._freights: dict[tuple[Tariff, int], Fraction] = {}
        for row in self.rows if network.charges else ():
            self.charge(row)  # raises where it is not known
        self.low: dict[int, int] = {}
        self.high: dict[int, int] = {}
        self._limit_lanes()
        self._leave_out_what_closed()
        self.stock = self._stock()
        self.lines = self._lines()
        self.groups = self._groups()
        if network.dated:
            # Stock serves on no day before plan and cut-off.
            plan_day = day_number(network.head.get("planned_at", network.head["cut_off"]))
            for group in self.groups.values():
                if group.site in self.stock:
                    group.earliest = max(group.earliest or 0, min(plan_day, network.today))
        self.places: dict[Key, int] = {(-1, "root", None): ROOT}
        self.arcs: list[Arc] = []
        self.priorities = sorted(
            {line.priority for line in self.groups.values() if line.priority}
            | {tiers.keep_priority for tiers in self.stock.values() if tiers.keep}
        )
        self._build()

    def _measures(self) -> dict[int, Fraction]:
        """Return for each measure on a usable lane how much of it one step is."""
        measures = self.network.lanes["measure"]
        codes = {measures.codes[row] for row in self.rows}
        return {code: self._per_step(measures.values[code]) for code in codes}

    def charge(self, row: int) -> Fraction:
        """Return what a lane charges for one unit, in the currency of the plan."""
        due = self.network.charges_on(row, self.item)
        return sum((money * self.network.worth[code] for _, code, money in due), Fraction(0))

    def freight(self, row: int, steps: int) -> Fraction:
        """Return what steps cost by the tariff of a lane, in the currency of the plan."""
        tariff = self.network.tariff(row)
        assert tariff is not None  # noqa: S101 - whoever asks knows
        key = (tariff, steps)
        if key not in self._freights:
            measured = tariff.measure(self.network, [(self.item, steps * self.step)])
            worth = self.network.worth[tariff.currency]
            self._freights[key] = tariff.price(measured)[1] * worth
        return self._freights[key]

    def dearest(self, row: int) -> Fraction:
        """Return the most that a step costs by a tariff: the last that fits, or that for ever."""
        last = self.high.get(row)
        if last is None:
            tariff = self.network.tariff(row)
            assert tariff is not None  # noqa: S101 - whoever asks knows
            of_step = tariff.measure(self.network, [(self.item, self.step)])
            last = int(max(tariff.turns(), default=0) / of_step) + 2 if of_step else 1
        return self.freight(row, last) - self.freight(row, max(0, last - 1))

    def _per_step(self, measure: str) -> Fraction:
        """Return how much of a measure one step of the item is."""
        per: Fraction | None = self.network.measure(self.item, measure)
        if per is None or per <= 0:
            raise Unusable(f"item {self.name!r} has no {measure}")
        return per * self.step

    def _limit_lanes(self) -> None:  # noqa: C901, PLR0912 - one table of limits, in the order of precedence
        """Work out what must and what can go on each lane, in steps; rules in their order."""
        lanes, codes = self.network.lanes, self.network.lanes["measure"].codes
        must, capacity = lanes["must_ship"], lanes["capacity"]
        broken = set()
        for row in self.rows:
            # What all items must reach together no item must by itself.
            if must.has(row) and lanes["per"][row] != "together":
                steps = must[row] / self.amounts[codes[row]]
                self.low[row] = steps.numerator // steps.denominator
                if steps.denominator != 1:
                    broken.add(row)
            if capacity.has(row):
                per = self.amounts[codes[row]] * capacity.power
                self.high[row] = capacity.numbers[row] * per.denominator // per.numerator
        fixed: set[int] = set()
        for rule in self.rules:
            if rule.kind != "fixed_quantity":
                continue
            for row in rule.lanes.intersection(self.rows):
                steps = Fraction(rule.rule["quantity"]) / self.amounts[codes[row]]
                whole = steps.numerator // steps.denominator
                if row in fixed and self.low[row] != whole:
                    raise Unusable("fixed quantities contradict each other")
                self.low[row] = self.high[row] = whole
                fixed.add(row)
                broken.discard(row)
                if steps.denominator != 1:
                    broken.add(row)
        for rule in self.rules:
            if rule.kind == "closure":
                for row in rule.lanes.intersection(self.rows):
                    self.low[row] = self.high[row] = 0
                    broken.discard(row)
        if broken:
            raise Unusable("a must-ship or fixed quantity is off the step")
        if any(low > self.high[row] for row, low in self.low.items() if row in self.high):
            raise Unusable("a must-ship is above its capacity")

    def _leave_out_what_closed(self) -> None:
        """Let nothing go on departures that closed before the plan is made."""
        lanes, head = self.network.lanes, self.network.head
        made = instant(head.get("planned_at", head["cut_off"]))
        for row in self.rows:
            last = lanes["closes"][row] or lanes["departs"][row]
            if last is not None and instant(last) < made:
                self.low[row] = self.high[row] = 0

    def _stock(self) -> dict[int, Tiers]:
        """Return the stock by site; running sums are rounded down to steps, then differenced."""
        network, supply = self.network, self.network.supply
        stock: dict[int, Tiers] = {}
        held: dict[int, Fraction] = {}
        for row in network.supply_of(self.item):
            site = supply["site"][row]
            tiers = stock.setdefault(site, Tiers())
            units = network.units(self.item, supply["unit"][row])
            currency, money = supply["currency"][row], (supply["unit_cost"][row] or 0) / units
            cost = money * network.worth[currency]
            named = supply["available_from"][row]
            since = 0 if named is None else day_number(named)
            of_tier = (cost, currency, since)
            if (
                not tiers.costs
                or (tiers.costs[-1], tiers.stated[-1][0], tiers.since[-1]) != of_tier
            ):
                tiers.costs.append(cost)
                tiers.stated.append((currency, money))
                tiers.since.append(since)
                tiers.steps.append(0)
            before = held.get(site, Fraction(0))
            held[site] = before + supply["quantity"][row] * units
            gained = held[site] // self.step - before // self.step
            tiers.steps[-1] += gained
            tiers.rows.append((len(tiers.costs), gained, supply["lot"][row]))
            kept = supply["keep_quantity"][row]
            if kept is not None and kept * units >= self.step:
                tiers.keep = kept * units // self.step
                tiers.keep_priority = supply["keep_priority"][row]
        return stock

    def _lines(self) -> list[Line]:
        """Return the order lines of the item, rounded as the options say."""
        network, demand = self.network, self.network.demand
        lines = []
        for row in network.order_lines_of(self.item):
            units = network.units(self.item, demand["unit"][row])
            exact = demand["quantity"][row] * units / self.step
            wanted = exact.numerator // exact.denominator
            if exact.denominator != 1:
                if self.options["demand_rounding"] == "refuse":
                    raise Unusable("an order line is off the step")
                wanted += self.options["demand_rounding"] == "up"
            money = demand["shortage_cost"][row]
            if money is None:
                money = demand["worth_at_most"][row]
            priority = demand["priority"][row]
            if money is not None:
                money /= units
            elif not priority and self.options["worth_at_most"] is not None:
                money = self.options["worth_at_most"]
            elif not priority:
                priority = 5
            days = [
                None if demand[column][row] is None else day_number(demand[column][row])
                for column in ("earliest", "due", "latest")
            ]
            late = demand["late_cost_per_day"][row]
            rank = (
                priority if money is None else 0,
                money,
                demand["origins"].codes[row],
                *days,
                None if late is None else late / units,
            )
            lines.append(Line(row, demand["site"][row], wanted, rank))
        return lines

    def _groups(self) -> dict[str, Line]:
        """Return the groups, by their smallest reference, each with the sum of what it wants."""
        groups: dict[str, Line] = {}
        labels: dict[Key, str] = {}
        for line in self.lines:
            if not line.wanted:
                continue
            rank = line.rank
            label = self.network.demand["reference"][line.row].decode()
            line.group = labels.setdefault((line.site, *rank), label)
            group = groups.setdefault(line.group, Line(line.row, line.site, 0, rank))
            group.wanted += line.wanted
        return groups

    def place(
        self, site: int, side: str, qualifier: str | None = None, day: int | None = None
    ) -> int:
        """Return the number of a place (on a day), a new one if it is not known."""
        return self.places.setdefault(place_key(site, side, qualifier, day), len(self.places))

    def arc(  # noqa: PLR0913, PLR0917 - what an arc is
        self,
        kind: str,
        tail: int,
        head: int,
        key: Key = (),
        money: Fraction = Fraction(0),
        high: int | None = UNLIMITED,
        low: int = 0,
        rank: int = 0,
    ) -> None:
        """Add an arc."""
        self.arcs.append(Arc(kind, tail, head, low, high, money, rank, key))

    def allowed(self, group: Line) -> set[int] | None:
        """Return the sites whose stock may serve a group, None if all may."""
        if group.origins < 0:
            return None
        return {self.network.site_at[site] for site in self.network.origins[group.origins]}

    def _build(self) -> None:
        """Add all places and arcs."""
        lanes = self.network.lanes
        self.starts = {lanes["origin"][row] for row in self.rows}
        self.before = defaultdict(set)
        for row in self.usable:
            ends = self.network.stated
            self.before[ends["destination"][row]].add(ends["origin"][row])
        self.arriving = defaultdict(set)
        for row in self.rows:
            self.arriving[lanes["destination"][row]].add(lanes["origin"][row])
        at_site = defaultdict(list)
        for label, group in self.groups.items():
            at_site[group.site].append((label, group))
        relevant = self.starts | set(self.arriving) | set(self.stock) | set(at_site)
        self.closed = set()
        for rule in self.rules:
            if rule.kind == "closure":
                self.closed |= rule.sites
        self.limits = self._throughput(relevant)
        self._find_days(at_site)
        self.leave: dict[Key, int] = {}
        self.enter: dict[Key, int] = {}
        self.apart: dict[int, bool] = {}
        for site in sorted(relevant):
            for day in self.days[site]:
                self._build_site(site, day, at_site[site])
            for label, group in at_site[site]:
                node = self.place(site, "demand", label)
                self._want(node, group.wanted, (site, label), group.priority, group.money)
            if site in self.stock:
                self._build_stock(site, self.stock[site])
            self._build_storage(site)
        self.lane_tail = array("i", [self._start(row) for row in self.rows])
        self.lane_head = array("i", [self._end(row) for row in self.rows])

    def _find_days(self, at_site: dict[int, list[tuple[str, Line]]]) -> None:
        """Find the days of each site; those that nothing tells apart are named by the first.

        In a network without dates every site has the one day None.
        """
        network, lanes = self.network, self.network.lanes
        self.days: dict[int, list[int | None]] = defaultdict(lambda: [None])
        self.same: dict[Key, int] = {}
        if not network.dated:
            return
        found: dict[int, set[int]] = defaultdict(set)
        for row in self.rows:
            found[lanes["origin"][row]].add(network.departs[row])
            found[lanes["destination"][row]].add(network.arrives[row])
        for site in set(at_site) | set(self.stock):
            since = self.stock[site].since if site in self.stock else ()
            for day, (_, group) in itertools.product(since, at_site.get(site, ())):
                found[site].add(max(network.today, day, group.earliest or 0))
            if not found[site]:
                found[site].add(network.today)
        for site, own in found.items():
            since = self.stock[site].since if site in self.stock else []
            groups = [group for _, group in at_site.get(site, ())]
            looks: dict[Value, int] = {}
            for day in sorted(own):
                look: Value = day
                if not network.passing[site] and not self.limits.get(site):
                    look = ([day >= first for first in since], [g_late(g, day) for g in groups])
                self.same[(site, day)] = looks.setdefault(str(look), day)
            self.days[site] = list(dict.fromkeys(looks.values()))

    def _spot(self, site: int, days: Value, row: int) -> Key:
        """Return a site, and the day that names the place where it is on one of the days."""
        return (site, None if days is None else self.same[(site, days[row])])

    def _start(self, row: int) -> int:
        """Return the place where a lane starts."""
        return self.leave[self._spot(self.network.lanes["origin"][row], self.network.departs, row)]

    def _end(self, row: int) -> int:
        """Return the place where a lane ends."""
        lanes = self.network.lanes
        spot = self._spot(lanes["destination"][row], self.network.arrives, row)
        if spot in self.enter:
            return self.enter[spot]
        name = self.network.sites[lanes["origin"][row]]["id"]
        return self.places[place_key(spot[0], "received", name, spot[1])]

    def _throughput(self, relevant: set[int]) -> dict[int, dict[str, int]]:
        """Return by site and flow the least limit in steps."""
        limits: dict[int, dict[str, int]] = defaultdict(dict)
        for rule in self.rules:
            if rule.kind != "throughput":
                continue
            if not self.network.measure(self.item, rule.rule.get("measure", "unit")):
                continue  # It cannot pass, or the limit itself says that it is not known.
            for site in rule.sites & relevant:
                per = self._per_step(rule.rule.get("measure", "unit"))
                most, flow = Fraction(rule.rule["maximum"]) // per, rule.rule["flow"]
                limits[site][flow] = min(most, limits[site].get(flow, most))
        return limits

    def _build_site(  # noqa: C901, PLR0912 - a site is built in one place
        self, site: int, day: int | None, groups: list[tuple[str, Line]]
    ) -> None:
        """Add what a site is made of on a day, and the ways to the order lines there."""
        network, limit = self.network, self.limits.get(site, {})
        passing, arrivals = network.passing[site], self.arriving.get(site, set())
        own: Key = (site,) if day is None else (site, day)
        on = () if day is None else (day_text(day),)
        choosy = any(group.origins >= 0 for _, group in groups)
        mixed = not passing and arrivals and (site in self.stock or site in self.starts)
        apart = self.apart[site] = bool(choosy or mixed)
        if apart:
            # No one arc carries all of it: several lanes share the limit.
            limit = {flow: most for flow, most in limit.items() if flow == "sent" and not passing}
        handling = network.sites[site]["handling"](self.name) * self.step
        shut = 0 if site in self.closed else UNLIMITED
        through = 0 if site in self.closed else limit.get("through")
        entry = self.place(site, "in", None, day)
        leave = exit_ = self.place(site, "out", None, day)
        self.arc("handle", entry, exit_, own, handling, through)
        if apart or "sent" in limit:
            leave = self.place(site, "sent", None, day)
            self.arc("leave", exit_, leave, own, high=limit.get("sent"))
        self.leave[(site, day)] = leave
        received: list[tuple[int | None, str | None]] = []
        if choosy:
            here = self._arriving(site, day) if network.dated else arrivals
            received = [(origin, network.sites[origin]["id"]) for origin in sorted(here)]
        elif (apart and arrivals) or "received" in limit:
            received = [(None, None)]
        if not choosy:
            at = self.place(site, "received", None, day) if received else entry
            self.enter[(site, day)] = at
        for _, name in received:
            at = self.place(site, "received", name, day)
            if not apart:
                self.arc("enter", at, entry, own, high=limit["received"])
            elif passing:
                self.arc("pass", at, leave, (site, name, *on), handling, shut)
        for label, group in groups:
            node, allowed = self.place(site, "demand", label), self.allowed(group)
            late = None if day is None else g_late(group, day)
            if day is not None and late is None:
                continue
            if allowed is None or site in allowed:
                self.arc("serve", exit_, node, (site, label, "out", None, *on))
                self._mark_late(group, late)
            for origin, name in received if apart else ():
                if allowed is None or self._accepts(origin, allowed):
                    at = self.place(site, "received", name, day)
                    key = (site, label, "received", name, *on)
                    self.arc("serve", at, node, key, handling, shut)
                    self._mark_late(group, late)

    def _build_storage(self, site: int) -> None:
        """Let what is about to leave a cross-dock wait for its next day."""
        if not self.network.dated or not self.network.stores(site, self.item):
            return
        days = self.days[site]
        side = "sent" if self.apart[site] else "out"
        for before, after in zip(days, days[1:]):  # noqa: B905, RUF007 - Python 3.9
            tail, head = (self.place(site, side, None, day) for day in (before, after))
            self.arc("store", tail, head, (site, day_text(before or 0)))

    def _arriving(self, site: int, day: int | None) -> set[int]:
        """Return the sites from which something arrives at a place of a site."""
        lanes, arrives = self.network.lanes, self.network.arrives
        return {
            lanes["origin"][row]
            for row in self.rows
            if lanes["destination"][row] == site and self.same[(site, arrives[row])] == day
        }

    def _mark_late(self, group: Line, late: int | None) -> None:
        """Let the arc that was added last cost or weigh that goods on it are late."""
        arc = self.arcs[-1]
        if late and group.late_money is not None:
            arc.late = late * group.late_money * self.step
            arc.money += arc.late
        elif late:
            arc.days = late * (10 - group.priority if group.priority else 1)

    def _accepts(self, origin: int | None, allowed: set[int]) -> bool:
        """Return whether all stock that can come from ``origin`` is allowed; none of it: no."""
        assert origin is not None  # noqa: S101 - only sites with origins ask
        behind, new = {origin}, [origin]
        while new:
            here = new.pop()
            for before in self.before.get(here, ()) if self.network.passing[here] else ():
                if before not in behind:
                    behind.add(before)
                    new.append(before)
        behind &= stocked(self.network, self.item)
        if behind & allowed and behind - allowed:
            raise Unusable("origins behind a cross-dock are allowed only in part")
        return bool(behind & allowed)

    def _build_stock(self, site: int, tiers: Tiers) -> None:
        """Add the stock of a site, and what of it should stay."""
        days = self.days[site]
        for tier, (cost, steps) in enumerate(zip(tiers.costs, tiers.steps), 1):  # noqa: B905 - 3.9
            key, money, since = (site, tier), cost * self.step, tiers.since[tier - 1]
            spots = [
                (self.place(site, "in", None, day), key if day is None else (*key, day_text(day)))
                for day in days
                if day is None or since <= day
            ]
            if len(days) == 1 and not tiers.keep:
                there, day = steps if spots else 0, days[0]
                entry = self.place(site, "in", None, day)
                named = key if day is None else (*key, day_text(day))
                self.arc("draw", ROOT, entry, named, money, there)
                continue
            at = self.place(site, "stock", str(tier))
            self.arc("supply", ROOT, at, key, high=steps)
            for entry, named in spots:
                self.arc("draw", at, entry, named, money)
            if tiers.keep:
                self.arc("keep", at, self.place(site, "keep"), key)
        if tiers.keep:
            keep = self.place(site, "keep")
            self._want(keep, tiers.keep, (site, None), tiers.keep_priority, None)

    def _want(
        self, node: int, wanted: int, key: Key, priority: int, money: Fraction | None
    ) -> None:
        """Add what is wanted at a place, and how short it may be."""
        self.arc("want", node, ROOT, high=wanted, low=wanted)
        if self.options["shortages"] == "allow":
            rank = self.priorities.index(priority) + 1 if priority else 0
            cost = (money or Fraction(0)) * self.step
            self.arc("short", ROOT, node, key, cost, rank=rank)


# ------------------------------------------------------------------ 6. the proof


class Flow:
    """The flow of one item as plan and certificate state it, on lanes and on other arcs."""

    def __init__(  # noqa: C901, PLR0912 - three passes over the arcs, each needing the one before
        self, formal: Formal, on_lane: dict[int, int], stated: dict[Key, int]
    ) -> None:
        """Put stated flows on their arcs, and work out the rest: entering, handling, leaving."""
        self.formal, self.on_lane = formal, on_lane
        at_row = {row: at for at, row in enumerate(formal.rows)} if on_lane else {}
        self.lanes = {at_row[row]: steps for row, steps in on_lane.items()}
        came: dict[int, int] = defaultdict(int)
        went: dict[int, int] = defaultdict(int)
        for at, steps in self.lanes.items():
            came[formal.lane_head[at]] += steps
            went[formal.lane_tail[at]] += steps
        self.arcs = [0] * len(formal.arcs)
        shelves: dict[Key, int] = defaultdict(int)
        for key, steps in stated.items():
            if key[0] in ("draw", "keep"):
                shelves[key[1:3]] += steps
        for at, arc in enumerate(formal.arcs):
            if arc.kind == "want":
                self.arcs[at] = arc.low
            elif arc.kind == "supply":
                self.arcs[at] = shelves.get(arc.key, 0)
            else:
                self.arcs[at] = stated.get((arc.kind, *arc.key), 0)
            if arc.kind == "draw":
                came[arc.head] += self.arcs[at]
            elif arc.kind == "pass":
                went[arc.head] -= self.arcs[at]
            elif arc.kind == "store":
                went[arc.tail] += self.arcs[at]
                went[arc.head] -= self.arcs[at]
        for at, arc in enumerate(formal.arcs):
            if arc.kind == "enter":
                self.arcs[at] = came[arc.tail]
                came[arc.head] += came[arc.tail]
            elif arc.kind == "leave":
                self.arcs[at] = went[arc.head]
        self._drawn: dict[Key, int] = defaultdict(int)
        for at, arc in enumerate(formal.arcs):
            if arc.kind == "handle":
                self.arcs[at] = came[arc.tail]
            elif arc.kind == "draw":
                self._drawn[arc.key[:2]] += self.arcs[at]

    def drawn(self, site: int, tier: int) -> int:
        """Return what is drawn of a tier, on all days together."""
        return self._drawn.get((site, tier), 0)

    def of(self, kind: str) -> dict[Key, int]:
        """Return the flows above 0 on arcs of a kind, by their key."""
        pairs = zip(self.formal.arcs, self.arcs)  # noqa: B905 - Python 3.9
        return {arc.key: steps for arc, steps in pairs if arc.kind == kind and steps}


def amount(text: str) -> Fraction:
    """Return the value of the text of an exact number."""
    return Fraction(text)


def in_steps(text: str, step: Fraction) -> int | None:
    """Return a quantity in steps, None unless it is a whole number above 0."""
    steps = Fraction(text) / step
    return steps.numerator if steps.denominator == 1 and steps > 0 else None


def read_flow(
    formal: Formal, lines: list[PlanLine], proof: dict[str, Any], report: Report
) -> Flow | None:
    """Return the flow of an item, None if documents do not state one."""
    usable, sound = set(formal.rows), True
    on_lane = {}
    for line in lines:
        steps = in_steps(line.document["quantity"], formal.step)
        if line.row not in usable:
            report.add("name_unknown", "the item cannot use this lane", line.place)
            sound = False
        if steps is None:
            report.add("quantity_wrong", "not a whole number of steps above 0", line.place)
            sound = False
        on_lane[line.row] = steps or 0
    known = {(arc.kind, *arc.key) for arc in formal.arcs if arc.key}
    stated: dict[Key, int] = {}
    tables = (
        ("draws", "draw", ("tier",)),
        ("kept", "keep", ("tier",)),
        ("serves", "serve", ("group", "from", "origin")),
        ("passes", "pass", ("origin",)),
        ("stored", "store", ()),
        ("shortages", "short", ("group",)),
    )
    for table, kind, fields in tables:
        for number, entry in enumerate(proof.get(table, ())):
            place = f"items/{formal.name}/{table}/{number}"
            site = formal.network.site_at.get(entry["site"], -1)
            key = (kind, site, *(entry[field] for field in fields))
            if "day" in entry:
                key = (*key, entry["day"])
            steps = in_steps(entry["quantity"], formal.step)
            if key not in known:
                report.add("name_unknown", "there is no such arc", place)
                sound = False
            elif key in stated:
                report.add("listed_twice", "this flow is stated twice", place)
                sound = False
            if steps is None:
                report.add("quantity_wrong", "not a whole number of steps above 0", place)
                sound = False
            stated[key] = steps or 0
    return Flow(formal, on_lane, stated) if sound else None


def check_flow(flow: Flow, report: Report) -> None:
    """Check every limit, and that as much leaves every place as comes to it."""
    formal = flow.formal
    balance: dict[int, int] = defaultdict(int)
    for row, low in formal.low.items():
        if flow.on_lane.get(row, 0) < low:
            report.add("limit_broken", "less than must go", formal.network.lane_name(row))
    for row, high in formal.high.items():
        if flow.on_lane.get(row, 0) > high:
            report.add("limit_broken", "more than can go", formal.network.lane_name(row))
    for at, steps in flow.lanes.items():
        balance[formal.lane_tail[at]] -= steps
        balance[formal.lane_head[at]] += steps
    for arc, steps in zip(formal.arcs, flow.arcs):  # noqa: B905 - Python 3.9
        if steps < arc.low or (arc.high is not None and steps > arc.high):
            report.add("limit_broken", f"{arc.kind} {steps}", formal.name)
        balance[arc.tail] -= steps
        balance[arc.head] += steps
    for place, at in formal.places.items():
        if balance[at]:
            report.add("not_conserved", f"{balance[at]} steps are lost at {place[1]}", formal.name)


def read_prices(formal: Formal, proof: dict[str, Any], report: Report) -> list[int] | None:
    """Return the price of every place, None if the certificate does not state them."""
    prices, sound = {ROOT: 0}, True
    for number, entry in enumerate(proof["prices"]):
        place = f"items/{formal.name}/prices/{number}"
        node = formal.places.get(node_key(formal.network, entry))
        if node is None:
            report.add("name_unknown", "there is no such place", place)
            sound = False
        elif node in prices:
            report.add("listed_twice", "a place has two prices", place)
            sound = False
        else:
            prices[node] = int(entry["price"])
    if not sound:
        return None
    for key, node in formal.places.items():
        if node not in prices:
            report.add("price_missing", f"no price at {key[1]}", formal.name)
    if len(prices) < len(formal.places):
        return None
    return [prices[node] for node in range(len(formal.places))]


def scaled_lane_costs(formal: Formal, scale: Fraction) -> tuple[list[Any], bool]:
    """Return what a step costs on each lane, times the scale, and whether all of it is whole."""
    network, lanes = formal.network, formal.network.lanes
    costs = lanes["unit_cost"]
    columns = [lanes[name].codes for name in ("measure", "currency", "charges")]
    factors: dict[Key, tuple[int, int, Fraction]] = {}
    lane_costs: list[int] = []
    whole = True
    for row in formal.rows:
        key = tuple(codes[row] for codes in columns)
        if key not in factors:
            worth = network.worth[lanes["currency"][row]]
            ratio = formal.amounts[key[0]] * worth * scale / costs.power
            charges = formal.charge(row) * formal.step * scale
            factors[key] = (ratio.numerator, ratio.denominator, charges)
        times, over, charged = factors[key]
        cost, rest = divmod(costs.numbers[row] * times, over)
        whole = whole and not rest and charged.denominator == 1
        if lanes["tariff"].codes[row] >= 0:
            dearest = formal.dearest(row) * scale
            cost, whole = dearest.numerator, whole and dearest.denominator == 1
        lane_costs.append(cost + charged.numerator)
    return lane_costs, whole


def check_prices(  # noqa: C901 - the argument of the proof, from top to bottom
    flow: Flow, proof: dict[str, Any], scale: Fraction, report: Report
) -> None:
    """Check that no flow costs less, over every lane (complementary slackness).

    With prices at the places, an arc from i to j has the reduced cost: cost + price(i) - price(j).
    Where it is above 0 nothing beyond the minimum may flow; below 0 the arc must be full. Then any
    other flow costs at least as much. One step short of the r-th of T priorities costs
    (T + 1 - r) * base; a base above what any way round the network can cost makes less shortage
    of a priority better than any saving, and better than any shortage of later priorities. A step
    a day late weighs ``late_base`` times its weight, between shortage and money likewise.
    """
    formal = flow.formal
    prices = read_prices(formal, proof, report)
    lane_costs, whole = scaled_lane_costs(formal, scale)
    arc_costs = [arc.money * scale for arc in formal.arcs]
    if not whole or any(cost.denominator != 1 for cost in arc_costs):
        report.add("cost_scale_wrong", "a scaled cost is not whole", formal.name)
        return
    base, late_base = int(proof["base"]), int(proof.get("late_base", "0"))
    largest = max(map(abs, itertools.chain([0], lane_costs, arc_costs)))
    weighs = any(arc.days for arc in formal.arcs)
    if weighs != ("late_base" in proof) or (
        weighs and late_base < 2 * len(formal.places) * largest + 1
    ):
        report.add("weights_too_small", "the base of lateness does not prove it", formal.name)
    arc_costs = [cost + arc.days * late_base for arc, cost in zip(formal.arcs, arc_costs)]  # noqa: B905 - Python 3.9
    largest = max(map(abs, itertools.chain([0], lane_costs, arc_costs)))
    if base < 2 * len(formal.places) * largest + 1:
        report.add("weights_too_small", "the base does not prove the order", formal.name)
    if prices is None:
        return
    for at, cost in enumerate(lane_costs):
        if formal.network.lanes["tariff"].codes[formal.rows[at]] >= 0:
            gain = prices[formal.lane_head[at]] - prices[formal.lane_tail[at]]
            check_steps(flow, at, gain / scale, report)
            continue
        reduced = cost + prices[formal.lane_tail[at]] - prices[formal.lane_head[at]]
        if reduced:
            row, steps = formal.rows[at], flow.lanes.get(at, 0)
            right = formal.low.get(row, 0) if reduced > 0 else formal.high.get(row)
            if steps != right:
                name = formal.network.lane_name(row)
                report.add("not_optimal", f"{steps} steps contradict the prices", name)
    for arc, steps, cost in zip(formal.arcs, flow.arcs, arc_costs):  # noqa: B905 - Python 3.9
        weight = (len(formal.priorities) + 1 - arc.rank) * base if arc.rank else 0
        reduced = cost.numerator + weight + prices[arc.tail] - prices[arc.head]
        if reduced and steps != (arc.low if reduced > 0 else arc.high):
            report.add("not_optimal", f"{arc.kind} {steps} contradicts the prices", formal.name)


def check_steps(flow: Flow, at: int, gain: Fraction, report: Report) -> None:
    """Check a lane whose steps get dearer: one more would not pay, and the last one does.

    ``gain`` is what a step is worth more where the lane ends than where it starts.
    """
    formal = flow.formal
    row, steps = formal.rows[at], flow.lanes.get(at, 0)
    paid, cost = gain - formal.charge(row) * formal.step, formal.freight(row, steps)
    more = steps != formal.high.get(row) and formal.freight(row, steps + 1) - cost < paid
    less = steps > formal.low.get(row, 0) and cost - formal.freight(row, steps - 1) > paid
    if more or less:
        name = formal.network.lane_names.name(row)
        report.add("not_optimal", f"{steps} steps contradict the prices", name)


class Limit:
    """A limit that items share: what counts, in whole grains of a measure, and how much may."""

    def __init__(self, name: Key, grain: Fraction, numbers: dict[int, int]) -> None:
        """Keep its name (rule, site, lane) and how many grains a step of each item is."""
        self.name, self.grain, self.numbers = name, grain, numbers
        self.least: int | None = None
        self.most: int | None = None


class Shared:
    """All limits that items may share: by name, and by the lanes and the stock that count."""

    def __init__(self, network: Network, rules: list[Rule]) -> None:
        """Find them."""
        self.network, self.rules = network, rules
        self.limits: dict[Key, Limit] = {}
        self.on_lane: dict[int, list[Limit]] = defaultdict(list)
        self.on_stock: dict[int, list[Limit]] = defaultdict(list)
        self._of_lanes()
        for rule in rules:
            if rule.kind in ("throughput", "shared_capacity"):
                self._of_rule(rule)

    def _grains(self, measure: str, items: set[int]) -> tuple[Fraction, dict[int, int]]:
        """Return the largest amount that steps of all items are multiples of, and how many."""
        steps = {}
        for item in sorted(items):
            per = self.network.measure(item, measure)
            if per is not None and per > 0:
                steps[item] = per * self.network.items[item]["step"]
        grain = Fraction(0)
        for step in steps.values():
            rest = step
            while rest:
                grain, rest = rest, grain % rest
        return grain or Fraction(1), {item: int(step / grain) for item, step in steps.items()}

    def _of_lanes(self) -> None:
        """Add what lanes state for all items together."""
        network, lanes = self.network, self.network.lanes
        everything = set(range(len(network.items)))
        known: dict[str, tuple[Fraction, dict[int, int]]] = {}
        for row in network.lanes_of(-1):
            must, capacity = lanes["must_ship"][row], lanes["capacity"][row]
            if lanes["per"][row] != "together" or (must is None and capacity is None):
                continue
            measure = lanes["measure"][row]
            if measure not in known:
                known[measure] = self._grains(measure, everything)
            limit = Limit((None, None, network.lane_names.name(row)), *known[measure])
            if capacity is not None:
                limit.most = int(capacity // limit.grain)
            # What is closed for all items need not carry anything.
            if must is not None and not all(
                any(r.kind == "closure" and item in r.items and row in r.lanes for r in self.rules)
                for item in limit.numbers
            ):
                limit.least = int(-(-must // limit.grain))
            self.limits[limit.name] = limit
            self.on_lane[row].append(limit)

    def _of_rule(self, rule: Rule) -> None:
        """Add the limits of one rule."""
        network, lanes, says = self.network, self.network.lanes, rule.rule
        grain, numbers = self._grains(says.get("measure", "unit"), rule.items)
        about_sites = rule.kind == "throughput"
        each = says.get("per", "each") == "each"
        things = sorted(rule.sites if about_sites else rule.lanes)
        of_thing: dict[int, Limit] = {}
        for thing in things:
            name: Key = (says["id"], None, None)
            if each and about_sites:
                name = (says["id"], network.sites[thing]["id"], None)
            elif each:
                name = (says["id"], None, network.lane_names.name(thing))
            limit = self.limits.setdefault(name, Limit(name, grain, numbers))
            limit.most = int(Fraction(says["maximum"]) // grain)
            of_thing[thing] = limit
        if not about_sites:
            for row, limit in of_thing.items():
                self.on_lane[row].append(limit)
            return
        end = lanes["origin" if says["flow"] == "sent" else "destination"]
        for row, site in enumerate(end):
            if site in of_thing:
                self.on_lane[row].append(of_thing[site])
        if says["flow"] == "through":
            for site, limit in of_thing.items():
                self.on_stock[site].append(limit)

    def taken(self, formal: Formal) -> Iterator[tuple[int, Limit, int]]:
        """Yield (place among lanes and then arcs, limit, grains of a step) of all that counts."""
        for rule in self.rules:
            if rule.kind in ("throughput", "shared_capacity") and formal.item in rule.items:
                measure = rule.rule.get("measure", "unit")
                if not self.network.measure(formal.item, measure) and any(
                    limit.name[0] == rule.rule["id"]
                    for row in formal.rows
                    for limit in self.on_lane.get(row, ())
                ):
                    raise Unusable(f"item {formal.name!r} has no {measure}")
        for at, row in enumerate(formal.rows):
            for limit in self.on_lane.get(row, ()):
                if formal.item in limit.numbers:
                    yield at, limit, limit.numbers[formal.item]
        for at, arc in enumerate(formal.arcs):
            for limit in self.on_stock.get(arc.key[0], ()) if arc.kind == "draw" else ():
                if formal.item in limit.numbers:
                    yield len(formal.rows) + at, limit, limit.numbers[formal.item]

    def check(self, flows: list[Flow], report: Report) -> None:
        """Check that the flows of all items keep every limit."""
        sums: dict[Key, int] = defaultdict(int)
        for flow in flows:
            lanes = len(flow.formal.rows)
            for at, limit, number in self.taken(flow.formal):
                steps = flow.lanes.get(at, 0) if at < lanes else flow.arcs[at - lanes]
                sums[limit.name] += steps * number
        for name, limit in self.limits.items():
            least = limit.least is not None and sums[name] < limit.least
            if least or (limit.most is not None and sums[name] > limit.most):
                report.add("limit_broken", "a limit that items share", str(name))


class NoBound(Exception):  # noqa: N818 - short, and read aloud
    """A proof gives no bound: a code, and why."""


class Circle:
    """Items that share limits, and the proofs of what they achieve together.

    With a price m for each grain of a limit, every plan that keeps the limit costs at least what
    the items cost by themselves when they pay m for what they take, less m times the limit. What
    an item costs at least follows from prices at its places: each arc at the better of its limits.
    """

    def __init__(  # noqa: PLR0913, PLR0917 - what a circle is about
        self,
        shared: Shared,
        flows: list[Flow],
        others: list[Flow],
        parts: list[dict[str, Fraction]],
        options: dict[str, Any],
        scale: Fraction,
    ) -> None:
        """Work out what the circle achieves in each step."""
        self.shared, self.flows, self.others, self.scale = shared, flows, others, scale
        network = shared.network
        self.names = [flow.formal.name for flow in flows]
        self.measure = network.head.get("shortage_measure", "unit") if len(flows) > 1 else "unit"
        self.per: list[Fraction] = [
            (network.measure(flow.formal.item, self.measure) or 0) * flow.formal.step
            for flow in flows
        ]
        self.short: dict[int, Fraction] = {}
        if options["shortages"] == "allow":
            self.short = dict.fromkeys(
                sorted({p for f in flows for p in f.formal.priorities}), Fraction(0)
            )
            for flow, per in zip(flows, self.per):  # noqa: B905 - Python 3.9
                for arc, steps in zip(flow.formal.arcs, flow.arcs):  # noqa: B905 - Python 3.9
                    if arc.rank:
                        self.short[flow.formal.priorities[arc.rank - 1]] += steps * per
        self.cost = sum((sum(money.values(), Fraction(0)) for money in parts), Fraction(0))

    def steps(self) -> list[tuple[int | None, Fraction]]:
        """Return the priority of each step (None for the cost) and what it achieved."""
        return [*self.short.items(), (None, self.cost)]

    def bound(self, priority: int | None, proof: Value) -> Fraction:
        """Return what a proof shows that no plan comes below."""
        if proof is None and priority is None:
            raise NoBound("bound_wrong", "the cost has no proof")
        if proof is None:
            return Fraction(0)
        total = self._total(priority, proof)
        grid = Fraction(0)
        for step in self.per if priority is not None else [1 / self.scale]:
            rest = step
            while rest:
                grid, rest = rest, grid % rest
        grid = grid or Fraction(1)
        grains = total / grid
        return -(-grains.numerator // grains.denominator) * grid

    def least_of_nothing(self, proof: Value) -> Fraction:
        """Return what a proof shows of every plan where nothing costs anything."""
        return self._total(0, proof)

    def _total(self, priority: int | None, proof: Value) -> Fraction:
        """Return the bound of a step: shortage of a priority (0 is none), or (None) the cost."""
        scale = amount(proof["scale"])
        if scale <= 0:
            raise NoBound("cost_scale_wrong", "not above 0")
        every = [
            self._costs(flow.formal, priority, at, scale) for at, flow in enumerate(self.flows)
        ]
        worth, paid = self._limit_prices(proof, scale)
        caps = self._caps(priority, proof, scale)
        total = -worth - sum(price * scale * self.short[former] for former, price in caps.items())
        for flow, costs, per in zip(self.flows, every, self.per):  # noqa: B905 - Python 3.9
            formal, lanes = flow.formal, len(flow.formal.rows)
            for at, limit, number in self.shared.taken(formal) if paid else ():
                if limit.name in paid:
                    costs[at] += paid[limit.name] * number
            for at, arc in enumerate(formal.arcs):
                if arc.rank and formal.priorities[arc.rank - 1] in caps:
                    costs[lanes + at] += int(caps[formal.priorities[arc.rank - 1]] * per * scale)
            total += self._least(formal, costs, proof)
        return total / scale

    def _limit_prices(
        self,
        proof: Value,
        scale: Fraction,
    ) -> tuple[int, dict[Key, int]]:
        """Return what the limits are worth at their prices, and the price of a grain of each."""
        worth, paid = 0, {}
        for entry in proof["multipliers"]:
            name = (entry["rule"], entry["site"], entry["lane"])
            limit = self.shared.limits.get(name)
            if limit is None or name in paid:
                raise NoBound("name_unknown", "a price of no limit, or a second one")
            price = amount(entry["value"]) * limit.grain * scale
            bound = limit.most if price > 0 else limit.least
            if price.denominator != 1 or bound is None:
                raise NoBound("multiplier_wrong", "this price proves nothing")
            paid[name] = price.numerator
            worth += price.numerator * bound
        for flow in self.others if paid else ():
            formal = flow.formal
            for at, limit, _ in self.shared.taken(formal):
                lane = at < len(formal.rows)
                high = (
                    formal.high.get(formal.rows[at])
                    if lane
                    else formal.arcs[at - len(formal.rows)].high
                )
                if limit.name in paid and high != 0:
                    raise NoBound("multiplier_wrong", "others take of this limit, too")
        return worth, paid

    def _caps(self, priority: int | None, proof: Value, scale: Fraction) -> dict[int, Fraction]:
        """Return the prices of shortage of former priorities."""
        caps: dict[int, Fraction] = {}
        for entry in proof["caps"]:
            former, price = entry["priority"], amount(entry["value"])
            known = former in self.short and (priority is None or former < priority)
            whole = all((price * per * scale).denominator == 1 for per in self.per)
            if not known or former in caps or price < 0 or not whole:
                raise NoBound("multiplier_wrong", "this price proves nothing")
            caps[former] = price
        return caps

    def _costs(self, formal: Formal, priority: int | None, flow: int, scale: Fraction) -> list[int]:
        """Return what a step minimises on each lane and arc of a flow."""
        lanes, whole = [0] * len(formal.rows), True
        others = [Fraction(0)] * len(formal.arcs)
        if priority is None:
            lanes, whole = scaled_lane_costs(formal, scale)
            others = [arc.money * scale for arc in formal.arcs]
        for at, arc in enumerate(formal.arcs):
            if arc.rank and formal.priorities[arc.rank - 1] == priority:
                others[at] = self.per[flow] * scale
        if not whole or any(cost.denominator != 1 for cost in others):
            raise NoBound("cost_scale_wrong", "a scaled cost is not whole")
        return [*lanes, *(cost.numerator for cost in others)]

    def _least(
        self,
        formal: Formal,
        costs: list[int],
        proof: Value,
    ) -> int:
        """Return what every flow of an item costs at least: each arc at the better limit."""
        prices = [0] * len(formal.places)
        seen = {ROOT}
        for entry in proof["prices"]:
            for node in entry["nodes"] if entry["item"] == formal.name else ():
                site = formal.network.site_at.get(node["site"], -1)
                at = formal.places.get((site, node["side"], node["qualifier"]))
                if at is None or at in seen:
                    raise NoBound("name_unknown", "a price of no place, or a second one")
                seen.add(at)
                prices[at] = int(node["price"])
        lanes = (
            (
                formal.lane_tail[at],
                formal.lane_head[at],
                formal.low.get(row, 0),
                formal.high.get(row),
            )
            for at, row in enumerate(formal.rows)
        )
        others = ((arc.tail, arc.head, arc.low, arc.high) for arc in formal.arcs)
        total = 0
        for cost, (tail, head, low, high) in zip(costs, itertools.chain(lanes, others)):  # noqa: B905 - Python 3.9
            reduced = cost + prices[tail] - prices[head]
            if reduced > 0:
                total += reduced * low
            elif reduced < 0 and high is not None:
                total += reduced * high
            elif reduced < 0:
                raise NoBound("not_optimal", "an arc without limit gains without end")
        return total


def check_cut(formal: Formal, cut: dict[str, Any], place: str, report: Report) -> None:
    """Check that more must leave a set of places than can come into it."""
    inside = {ROOT} if cut["root"] else set()
    for entry in cut["nodes"]:
        node = formal.places.get(node_key(formal.network, entry))
        if node is None or node in inside:
            code = "name_unknown" if node is None else "listed_twice"
            report.add(code, "a place of the cut", place)
            return
        inside.add(node)
    lanes = (
        (formal.lane_tail[at], formal.lane_head[at], formal.low.get(row, 0), formal.high.get(row))
        for at, row in enumerate(formal.rows)
    )
    others = ((arc.tail, arc.head, arc.low, arc.high) for arc in formal.arcs)
    out = can_enter = 0
    for tail, head, low, high in itertools.chain(lanes, others):
        if tail in inside and head not in inside:
            out += low
        elif tail not in inside and head in inside:
            if high is None:
                report.add("cut_wrong", "an arc without limit leads into the cut", place)
                return
            can_enter += high
    if out <= can_enter:
        report.add("cut_wrong", "no more must leave than can come in", place)
    if (amount(cut["forced_out"]), amount(cut["can_enter"])) != (
        out * formal.step,
        can_enter * formal.step,
    ):
        report.add("cut_wrong", "the quantities are not those of the cut", place)


class PlanLine:
    """A plan line, with what it names found; ``row`` is -1 for goods used where they are drawn."""

    def __init__(self, document: dict[str, Any], number: int, ends: Key) -> None:
        """Keep the parts."""
        self.document, self.place = document, f"plan_lines/{number}"
        self.row, self.origin, self.destination, self.item = ends


def read_plan_lines(
    network: Network, plan: dict[str, Any], report: Report
) -> list[PlanLine] | None:
    """Return the plan lines, None if one names what is not there."""
    lines, seen, sound = [], set(), True
    for number, document in enumerate(plan["plan_lines"]):
        local = document["lane"] is None
        row = -1 if local else network.movement(document["lane"], document.get("departs"))
        origin = network.site_at.get(document["origin"], -1)
        destination = network.site_at.get(document["destination"], -1)
        item = network.item_at.get(document["item"], -1)
        line = PlanLine(document, number, (row, origin, destination, item))
        dates = {field: document[field] for field in ("departs", "arrives") if field in document}
        unknown = min(origin, destination, item) < 0 or (row < 0 and not local)
        if unknown or dates != network.dates_of(row):
            report.add("name_unknown", "a plan line names what is not there", line.place)
            sound = False
            continue
        key = (row, item, origin if local else -1)
        if key in seen:
            report.add("listed_twice", "two plan lines for one lane and item", line.place)
            sound = False
        seen.add(key)
        lines.append(line)
    return lines if sound else None


# ------------------------------------------------------------------ 7. the tables of the plan


class Audit:
    """One plan and its certificate, checked against the network."""

    def __init__(
        self,
        network: Network,
        options: dict[str, Any],
        plan: Value,
        certificate: Value,
        report: Report,
    ) -> None:
        """Keep the documents."""
        self.network, self.options, self.report = network, options, report
        self.plan, self.certificate = plan, certificate
        self.flows: list[Flow] = []

    def run(self, network_digest: str, options_digest: str) -> None:
        """Check everything."""
        for code, sound in (
            ("plan_malformed", is_plan(self.plan)),
            ("certificate_malformed", is_certificate(self.certificate)),
        ):
            if not sound:
                self.report.add(code, "the document does not have its shape")
        if self.report.problems:
            return
        self._check_heads(network_digest, options_digest)
        rules = rules_in_force(self.network)
        self._check_rules(rules)
        try:
            self.network.check_tariffs()
        except Unusable as error:
            self.report.add("network_unusable", str(error))
            return
        if self._has_unclear_limits():
            self.report.add("network_unusable", "a limit of several items does not say per what")
            return
        without = self.certificate["lexicographic"] == "no_plan"
        if without != (self.plan["status"] == "no_plan"):
            self.report.add("bound_wrong", "plan and certificate are about different answers")
        elif without:
            self._check_cuts(rules)
        else:
            self._check_planned(rules)

    def _check_heads(self, network_digest: str, options_digest: str) -> None:
        """Check digests and what the documents repeat of the head."""
        plan, certificate, head = self.plan, self.certificate, self.network.head
        digests = {
            "network_digest": network_digest,
            "options_digest": options_digest,
        }
        for document in (plan, certificate, plan["certificate"]):
            for field, right in digests.items():
                if document.get(field, right) != right:
                    self.report.add("digest_mismatch", "it belongs to something else", field)
        for field in ("name", "currency", "cut_off", "release_by"):
            if plan[field] != head.get(field):
                self.report.add("plan_head", "not that of the network", field)
        if certificate["currency"] != head["currency"]:
            self.report.add("plan_head", "not that of the network", "certificate currency")

    def _check_rules(self, rules: list[Rule]) -> None:
        """Check the list of rules."""
        applied = {rule.rule["id"] for rule in rules}
        expected = [
            {field: rule.get(field) for field in ("rule", "id", "note", "owner")}
            for rule in self.network.head["rules"]
        ]
        stated = [dict(rule) for rule in self.plan["rules_in_force"]]
        right = [rule.pop("applied") == (rule["id"] in applied) for rule in stated]
        for rule in stated:
            del rule["binding"]
            rule.pop("one_more", None)
        if stated != expected or not all(right):
            self.report.add("rules_wrong", "not the rules of the network", "rules_in_force")

    def _has_unclear_limits(self) -> bool:
        """Return whether a limit on a lane of several items does not say that it is per item."""
        lanes = self.network.stated
        unclear = {
            row
            for row in self.network.lanes_of(-1)
            if lanes["per"][row] is None
            and (lanes["capacity"].has(row) or lanes["must_ship"].has(row))
        }
        users: dict[int, int] = defaultdict(int)
        for item in range(len(self.network.items) if unclear else 0):
            for row in unclear.intersection(usable_lanes(self.network, item)):
                users[row] += 1
        return any(count > 1 for count in users.values())

    def _check_cuts(self, rules: list[Rule]) -> None:
        """Check the proof that there is no plan."""
        cuts, circles = self.certificate["cuts"], self.certificate.get("contradictions", ())
        if not cuts and not circles:
            self.report.add("cut_wrong", "there is no cut")
        try:
            self._check_contradictions(rules, circles)
        except Unusable as error:
            self.report.add("network_unusable", str(error))
        for number, cut in enumerate(cuts):
            item = self.network.item_at.get(cut["item"])
            if item is None:
                self.report.add("name_unknown", "no such item", f"cuts/{number}")
                continue
            try:
                formal = Formal(self.network, self.options, rules, item)
            except Unusable as error:
                self.report.add("network_unusable", str(error), cut["item"])
                continue
            check_cut(formal, cut, f"cuts/{number}", self.report)

    def _check_contradictions(self, rules: list[Rule], circles: Value) -> None:
        """Check the proofs that limits which items share contradict each other.

        Where nothing costs anything, a bound above 0 shows that no flow keeps all limits. Without a
        proof a circle only states that no plan was found in whole steps.
        """
        alone = self.network.departs is not None or self.network.head.get("tariffs")
        if alone and circles:
            self.report.add("cut_wrong", "with dates or tariffs limits are of one item", "cuts")
            return
        shared = Shared(self.network, rules) if circles else None
        for number, circle in enumerate(circles):
            place = f"contradictions/{number}"
            places = [self.network.item_at.get(item, -1) for item in circle["items"]]
            if not places or places[0] < 0 or not rises(places):
                self.report.add("name_unknown", "no circle of items", place)
            elif circle["proof"] is not None and shared is not None:
                empty: dict[int, int] = {}
                flows = [
                    Flow(Formal(self.network, self.options, rules, item), empty, {})
                    for item in range(len(self.network.items))
                ]
                made = Circle(
                    shared,
                    [flows[item] for item in places],
                    [flow for item, flow in enumerate(flows) if item not in places],
                    [],
                    self.options,
                    Fraction(1),
                )
                try:
                    if made.least_of_nothing(circle["proof"]) <= 0:
                        detail = "the limits do not contradict each other"
                        self.report.add("cut_wrong", detail, place)
                except NoBound as flaw:
                    self.report.add(flaw.args[0], flaw.args[1], place)
                    self.report.add("cut_wrong", "no contradiction is shown", place)

    def _check_planned(self, rules: list[Rule]) -> None:
        """Check each item, and then what is said of all of them."""
        report, proofs = self.report, self.certificate["items"]
        lines = read_plan_lines(self.network, self.plan, report)
        if [proof["item"] for proof in proofs] != [item["id"] for item in self.network.items]:
            report.add("name_unknown", "not the items of the network", "items")
            return
        if lines is None:
            return
        scale = amount(self.certificate["cost_scale"])
        if scale <= 0:
            report.add("cost_scale_wrong", "not above 0", "cost_scale")
            return
        if not self._read_circles():
            return
        on_lanes = defaultdict(list)
        for line in lines:
            if line.row >= 0:
                on_lanes[line.item].append(line)
        self._read_flows(rules, on_lanes, scale)
        if len(self.flows) == len(proofs):
            Tables(self, lines, rules).check()

    def _read_flows(
        self, rules: list[Rule], on_lanes: dict[int, list[PlanLine]], scale: Fraction
    ) -> None:
        """Check each item; keep the flows that are stated."""
        report = self.report
        for item, proof in enumerate(self.certificate["items"]):
            try:
                formal = Formal(self.network, self.options, rules, item)
            except Unusable as error:
                report.add("network_unusable", str(error), proof["item"])
                continue
            flow = read_flow(formal, on_lanes[item], proof, report)
            if flow is not None:
                check_flow(flow, report)
                if proof["item"] not in self.together:
                    check_prices(flow, proof, scale, report)
                self.flows.append(flow)

    def _read_circles(self) -> bool:
        """Find which items are proved together; return whether that is said soundly."""
        self.together: set[str] = set()
        alone = self.network.departs is not None or self.network.head.get("tariffs")
        if alone and self.certificate.get("coupled"):
            self.report.add(
                "bound_wrong", "with dates or tariffs items are proved alone", "coupled"
            )
            return False
        for circle in self.certificate.get("coupled", ()):
            places = [self.network.item_at.get(item, -1) for item in circle["items"]]
            if not places or places[0] < 0 or not rises(places):
                self.report.add("name_unknown", "no circle of items", "coupled")
                return False
            if self.together.intersection(circle["items"]):
                self.report.add("listed_twice", "an item is in two circles", "coupled")
                return False
            self.together.update(circle["items"])
        return True


class Tables:
    """The tables of a plan whose flow is known for every item."""

    def __init__(self, audit: Audit, lines: list[PlanLine], rules: list[Rule]) -> None:
        """Keep what is compared."""
        self.network, self.plan, self.report = audit.network, audit.plan, audit.report
        self.certificate, self.options = audit.certificate, audit.options
        self.flows, self.lines, self.rules = audit.flows, lines, rules
        self.shared, self.together = Shared(audit.network, rules), audit.together
        # What sources of order lines use, in steps: by lane and item, or by site and item.
        self.used: dict[Key, int] = defaultdict(int)
        self.first: dict[Key, int] = defaultdict(int)
        self.last: dict[Key, int] = defaultdict(int)
        self.local: dict[Key, int] = defaultdict(int)
        self.lots: dict[Key, int] = defaultdict(int)
        self.references: dict[int, set[str]] = defaultdict(set)

    def wrong(self, code: str, detail: str, place: str) -> None:
        """Note a problem."""
        self.report.add(code, detail, place)

    def check(self) -> None:
        """Check all tables."""
        parts = self._money()
        try:
            # With dates or tariffs each limit is of one item.
            if self.network.departs is not None or self.network.head.get("tariffs"):
                self._check_site_limits()
            else:
                self.shared.check(self.flows, self.report)
            self._check_steps(parts)
        except Unusable as error:
            self.wrong("network_unusable", str(error), "rules")
            return
        self._check_site_use()
        self._check_totals(parts)
        if not self._check_order_lines():
            return
        self._check_use()
        self._check_shortages()
        self._check_plan_lines()
        self._check_currencies()
        self._check_consignments()

    def transport(self, row: int, flow: Flow, steps: int) -> Fraction:
        """Return what transport of steps of an item costs on a lane."""
        formal = flow.formal
        if self.network.tariff(row):
            return formal.freight(row, steps)
        return steps * formal.step * self.lane_money(row, formal.item)

    def lane_money(self, row: int, item: int) -> Fraction:
        """Return what transport of one unit of an item costs on a lane."""
        worth: Fraction = self.network.worth[self.network.lanes["currency"][row]]
        return self.stated_money(row, item) * worth

    def stated_money(self, row: int, item: int) -> Fraction:
        """Return the same in the currency of the lane."""
        lanes = self.network.lanes
        cost: Fraction = lanes["unit_cost"][row]
        per: Fraction = self.network.measure(item, lanes["measure"][row])
        return cost * per

    def _money(self) -> list[dict[str, Fraction]]:
        """Return the parts of the cost of every item."""
        kinds = {
            "draw": "supply",
            "handle": "handling",
            "serve": "handling",
            "pass": "handling",
            "short": "shortage",
        }
        parts = []
        for flow in self.flows:
            named = ("supply", "handling", "transport", "charges", "shortage", "lateness")
            money = dict.fromkeys(named, Fraction(0))
            for arc, steps in zip(flow.formal.arcs, flow.arcs):  # noqa: B905 - Python 3.9
                if arc.kind in kinds:
                    money[kinds[arc.kind]] += steps * (arc.money - arc.late)
                    money["lateness"] += steps * arc.late
            for row, steps in flow.on_lane.items():
                money["transport"] += self.transport(row, flow, steps)
                money["charges"] += steps * flow.formal.charge(row) * flow.formal.step
            parts.append(money)
        return parts

    def _check_steps(self, parts: list[dict[str, Fraction]]) -> None:
        """Check the steps of what is minimised, and the bounds."""
        expected: list[tuple[str, int | str, Fraction]] = []
        total = Fraction(0)
        for flow, money in zip(self.flows, parts):  # noqa: B905 - Python 3.9
            formal = flow.formal
            if formal.name in self.together:
                continue
            short = dict.fromkeys(formal.priorities, 0)
            for arc, steps in zip(formal.arcs, flow.arcs):  # noqa: B905 - Python 3.9
                if arc.rank:
                    short[formal.priorities[arc.rank - 1]] += steps
            if self.options["shortages"] == "allow":
                expected += [(formal.name, p, steps * formal.step) for p, steps in short.items()]
            if any(arc.days for arc in formal.arcs):
                late = sum(arc.days * steps for arc, steps in zip(formal.arcs, flow.arcs))  # noqa: B905 - Python 3.9
                expected.append((formal.name, "lateness", late * formal.step))
            expected.append((formal.name, "cost", sum(money.values(), Fraction(0))))
            total += expected[-1][2]
        circles = self._circles(parts)
        steps_ = self.certificate["steps"][: len(expected)]
        rest = self.certificate["steps"][len(expected) :]
        together = sum(len(circle.steps()) for circle in circles)
        if len(rest) != together or any("items" in one for one in steps_):
            self.wrong("bound_wrong", "not the steps of the plan", "steps")
            return
        stated = [
            (one["item"], one.get("priority", one["of"]), amount(one["achieved"])) for one in steps_
        ]
        if stated != expected:
            self.wrong("bound_wrong", "not what was achieved", "steps")
        if any(amount(one["achieved"]) != amount(one["bound"]) for one in steps_):
            self.wrong("bound_wrong", "a bound that is not achieved", "steps")
        cost, gap, proved = self._check_circles(circles, rest)
        self._check_ends(total + cost, gap, proved)

    def _check_ends(self, total: Fraction, gap: Fraction, proved: bool) -> None:  # noqa: FBT001 - as stated
        """Check what both documents state at last."""
        for value, right in (
            (self.certificate["total_cost"], total),
            (self.certificate["lower_bound"], total - gap),
            (self.certificate["gap"], gap),
            (self.plan["certificate"]["lower_bound"], total - gap),
            (self.plan["certificate"]["gap"], gap),
        ):
            if amount(value) != right:
                self.wrong("bound_wrong", "it does not follow from the steps", "lower_bound")
        for document in (self.certificate, self.plan["certificate"]):
            if document["lexicographic"] != ("proved" if proved else "best_found"):
                self.wrong("bound_wrong", "it does not follow from the steps", "lexicographic")

    def _circles(self, parts: list[dict[str, Fraction]]) -> list[Circle]:
        """Return the circles of items that are proved together."""
        found = []
        for circle in self.certificate.get("coupled", ()):
            inside = [flow.formal.name in circle["items"] for flow in self.flows]
            made = Circle(
                self.shared,
                [flow for flow, own in zip(self.flows, inside) if own],  # noqa: B905 - Python 3.9
                [flow for flow, own in zip(self.flows, inside) if not own],  # noqa: B905 - same
                [money for money, own in zip(parts, inside) if own],  # noqa: B905 - same
                self.options,
                amount(self.certificate["cost_scale"]),
            )
            found.append(made)
        return found

    def _check_circles(
        self, circles: list[Circle], stated: list[Value]
    ) -> tuple[Fraction, Fraction, bool]:
        """Check the steps of items that share limits; return cost, gap, and if all are proved."""
        cost, gap, proved = Fraction(0), Fraction(0), True
        for made, circle in zip(circles, self.certificate.get("coupled", ())):  # noqa: B905 - 3.9
            steps, proofs = made.steps(), circle["proofs"]
            place = "coupled/" + circle["items"][0]
            own, stated = stated[: len(steps)], stated[len(steps) :]
            cost += made.cost
            if len(proofs) != len(steps):
                self.wrong("bound_wrong", "not a proof for each step", place)
                continue
            for (priority, achieved), one, proof in zip(steps, own, proofs):  # noqa: B905 - same
                says = (one.get("items"), one.get("priority"), one.get("measure"))
                measure = None if priority is None else made.measure
                if says != (made.names, priority, measure):
                    self.wrong("bound_wrong", "not the step that belongs here", place)
                    continue
                if amount(one["achieved"]) != achieved:
                    self.wrong("bound_wrong", "not what was achieved", place)
                bound = amount(one["bound"])
                try:
                    if bound > made.bound(priority, proof):
                        self.wrong("bound_wrong", "the proof gives less", place)
                except NoBound as flaw:
                    self.wrong(flaw.args[0], flaw.args[1], place)
                proved = proved and bound == amount(one["achieved"])
                if priority is None:
                    gap += amount(one["achieved"]) - bound
        return cost, gap, proved

    def _check_site_limits(self) -> None:
        """Check throughput limits over all items of a rule together."""
        lanes = self.network.lanes
        for rule in self.rules:
            if rule.kind != "throughput":
                continue
            passed: dict[Key, Fraction] = defaultdict(Fraction)
            sent = rule.rule["flow"] == "sent"
            end = lanes["origin" if sent else "destination"]
            days = self.network.departs if sent else self.network.arrives
            for flow in self.flows:
                formal = flow.formal
                moved = [
                    ((end[row], days and days[row]), steps) for row, steps in flow.on_lane.items()
                ]
                if rule.rule["flow"] == "through":
                    moved += [
                        ((key[0], day_number(key[2]) if len(key) > 2 else None), steps)
                        for key, steps in flow.of("draw").items()
                    ]
                moved = [(spot, steps) for spot, steps in moved if spot[0] in rule.sites]
                if formal.item not in rule.items or not moved:
                    continue
                measure = rule.rule.get("measure", "unit")
                per = self.network.measure(formal.item, measure) * formal.step
                for spot, steps in moved:
                    passed[spot] += steps * per
            if any(quantity > Fraction(rule.rule["maximum"]) for quantity in passed.values()):
                self.wrong("limit_broken", "a throughput limit over items", rule.rule["id"])

    def _check_site_use(self) -> None:
        """Check the use of stock."""
        expected = []
        for flow in self.flows:
            kept = flow.of("keep")
            for site, tiers in flow.formal.stock.items():
                there = sum(tiers.steps)
                numbers = range(1, len(tiers.steps) + 1)
                shipped = sum(flow.drawn(site, tier) for tier in numbers)
                stays = sum(kept.get((site, tier), 0) for tier in numbers)
                if there:
                    steps = (there, shipped, stays, there - shipped - stays)
                    exact = tuple(flow.formal.step * number for number in steps)
                    expected.append((site, flow.formal.item, *exact))
        stated = []
        for entry in self.plan["site_use"]:
            ends = self.network.site_at.get(entry["site"]), self.network.item_at.get(entry["item"])
            fields = ("available", "shipped", "kept", "left")
            stated.append((*ends, *(amount(entry[field]) for field in fields)))
        if stated != sorted(expected):
            self.wrong("site_use_wrong", "not what is drawn and kept", "site_use")

    def _check_totals(self, parts: list[dict[str, Fraction]]) -> None:  # noqa: C901 - one table
        """Check money, its rounding, counts of order lines, and quantities."""
        plan, totals = self.plan, self.plan["totals"]
        sums = dict.fromkeys(plan["cost_parts"], Fraction(0))
        for money in parts:
            for part, value in money.items():
                sums[part] += value
        total = sum(sums.values(), Fraction(0))
        right = all(amount(plan["cost_parts"][part]) == value for part, value in sums.items())
        if not right or amount(plan["total_cost"]) != total:
            self.wrong("total_wrong", "not the sum of costs", "cost_parts")
        rounded = amount(plan["total_cost_rounded"])
        if plan["total_cost_rounded"] not in rounded_forms(total, plan["currency"]):
            self.wrong("total_wrong", "not the total, rounded", "total_cost_rounded")
        if amount(plan["rounding_difference"]) != rounded - total:
            self.wrong("total_wrong", "not the difference", "rounding_difference")
        lines = [(amount(line["served"]), amount(line["short"])) for line in plan["order_lines"]]
        complete = sum(not short for _, short in lines)
        none = sum(bool(short) and not served for served, short in lines)
        counts = (complete, len(lines) - complete - none, none, len(plan["set_aside"]))
        fields = ("lines_complete", "lines_in_part", "lines_none", "set_aside")
        late = [line["days_late"] > 0 for line in plan["order_lines"] if "days_late" in line]
        dated = self.network.dated and bool(plan["order_lines"])
        right = totals.get("lines_late") == (sum(late) if dated else None)
        if tuple(totals[field] for field in fields) != counts or not right:
            self.wrong("total_wrong", "not the number of order lines", "totals")
        expected = []
        for flow in self.flows:
            item, step = self.network.items[flow.formal.item], flow.formal.step
            wanted = sum(line.wanted for line in flow.formal.lines) * step
            served = sum(flow.of("serve").values()) * step
            weight = served * item["weight_kg"] if "weight_kg" in item else "unknown"
            if wanted:
                expected.append([item["id"], item["unit"], wanted, served, wanted - served, weight])
        stated = []
        for entry in totals["quantities"]:
            numbers = [amount(entry[field]) for field in ("wanted", "served", "short")]
            weight = entry["weight_kg"]
            weight = weight if weight == "unknown" else amount(weight)
            stated.append([entry["item"], entry["unit"], *numbers, weight])
        if stated != expected:
            self.wrong("total_wrong", "not the quantities", "totals")

    def _check_order_lines(self) -> bool:  # noqa: C901 - one table
        """Check each order line; return whether all of their ways could be followed."""
        documents, demand = self.plan["order_lines"], self.network.demand
        names = [name.decode() for name in demand["reference"]]
        if [document["reference"] for document in documents] != names:
            self.wrong("order_line_wrong", "not the order lines of the network", "order_lines")
            return False
        sound = True
        served: dict[Key, Fraction] = defaultdict(Fraction)
        for flow in self.flows:
            formal = flow.formal
            for line in formal.lines:
                document, place = documents[line.row], f"order_lines/{line.row}"
                if not self._is_ordered(formal, line, document):
                    self.wrong("order_line_wrong", "not what was ordered", place)
                if not adds_up(document):
                    self.wrong("order_line_wrong", "it does not add up", place)
                for source in document["sources"]:
                    sound = self._follow(flow, line, source, place) and sound
                if not self._is_dated(line, document):
                    self.wrong("order_line_wrong", "its dates do not follow", place)
                served[(formal.item, line.group)] += amount(document["served"])
        if not sound:
            return False
        for flow in self.flows:
            formal = flow.formal
            got: dict[str, int] = defaultdict(int)
            for key, steps in flow.of("serve").items():
                got[key[1]] += steps
            for label in formal.groups:
                if served[(formal.item, label)] != got[label] * formal.step:
                    self.wrong("order_line_wrong", "a group gets other than its flow", label)
        return True

    def _is_ordered(self, formal: Formal, line: Line, document: dict[str, Any]) -> bool:
        """Return whether an order line repeats what the network says of it."""
        demand, row = self.network.demand, line.row
        units = self.network.units(formal.item, demand["unit"][row])
        ordered, wanted = demand["quantity"][row] * units, line.wanted * formal.step
        said = {field: document.get(field) for field in ("order", "site", "item", "priority")}
        right = {
            "order": demand["order"][row],
            "site": self.network.sites[line.site]["id"],
            "item": formal.name,
            "priority": line.priority or None,
        }
        numbers: list[tuple[str, Fraction | None]] = [("quantity", wanted)]
        numbers += [
            ("shortage_cost", line.money),
            ("ordered", None if ordered == wanted else ordered),
        ]
        for field, value in numbers:
            text = document.get(field)
            if (None if text is None else amount(text)) != value:
                return False
        for field in ("earliest", "due", "latest"):
            if document.get(field) != demand[field][row]:
                return False
        for field in ("tags", "extra"):
            text = demand[field][row]
            if document.get(field) != (None if text is None else json.loads(text)):
                return False
        return said == right

    def _is_dated(self, line: Line, document: dict[str, Any]) -> bool:
        """Return whether an order line says how late it is, and gets nothing out of its window."""
        arrivals = [source.get("arrives") for source in document["sources"]]
        if not self.network.dated:
            return "days_late" not in document and not any(arrivals)
        late = [g_late(line, day_number(day)) for day in arrivals if day and is_date(day)]
        return (
            len(late) == len(arrivals)
            and None not in late
            and document.get("days_late") == max((days or 0 for days in late), default=0)
        )

    def _is_on_time(self, rows: list[int], source: dict[str, Any]) -> bool:
        """Return whether legs follow each other by their days, and the last is the arrival.

        Goods leave a cross-dock on the day on which they reach it. Where they are drawn they are
        from lots that are there by then.
        """
        network, supply = self.network, self.network.supply
        dates = [{k: leg[k] for k in leg if k != "lane"} for leg in source["legs"]]
        if dates != [network.dates_of(row) for row in rows]:
            return False
        if not network.dated:
            return True
        if not is_date(source.get("arrives", "")):
            return False
        arrives, departs = network.arrives, network.departs
        turns = zip(rows, rows[1:])  # noqa: B905, RUF007 - Python 3.9
        stays = [
            (network.lanes["origin"][after], arrives[before], departs[after])
            for before, after in turns
        ]
        if rows:
            end = network.lanes["destination"][rows[-1]]
            stays.append((end, arrives[rows[-1]], day_number(source["arrives"])))
        item = network.item_at[source["item"]]
        for site, since, until in stays:
            if since != until and (since > until or not network.stores(site, item)):
                return False
        first = day_text(departs[rows[0]]) if rows else source["arrives"]
        return any(
            (supply["available_from"][row] or "") <= first
            for row in network.supply_of(network.item_at[source["item"]])
            if supply["lot"][row] == source["lot"]
            and network.sites[supply["site"][row]]["id"] == source["origin"]
        )

    def _follow(self, flow: Flow, line: Line, source: dict[str, Any], place: str) -> bool:
        """Follow one source from its origin to the site of its line, and count what it uses."""
        network, formal = self.network, flow.formal
        steps = in_steps(source["quantity"], formal.step)
        origin = network.site_at.get(source["origin"], -1)
        rows = [network.movement(leg["lane"], leg.get("departs")) for leg in source["legs"]]
        allowed = formal.allowed(line)
        here, right = origin, origin >= 0 and source["item"] == formal.name
        right = right and (allowed is None or origin in allowed)
        for number, row in enumerate(rows):
            right = right and row in flow.on_lane and network.lanes["origin"][row] == here
            right = right and (number == 0 or network.passing[here])
            here = network.lanes["destination"][row] if right else -1
        if steps is None:
            self.wrong("order_line_wrong", "not a whole number of steps above 0", place)
            return False
        if not right or here != line.site or not self._is_on_time(rows, source):
            self.wrong("route_wrong", "no way from origin to site", place)
            return False
        self.lots[(origin, formal.item, source["lot"])] += steps
        for row in rows:
            self.used[(row, formal.item)] += steps
            self.references[row].add(network.demand["reference"][line.row].decode())
        if rows:
            self.first[(rows[0], formal.item)] += steps
            self.last[(rows[-1], formal.item)] += steps
        else:
            self.local[(line.site, formal.item)] += steps
        return True

    def _check_use(self) -> None:
        """Check that sources use lots and lanes as the flow does; the rest may only circle."""
        lanes = self.network.lanes
        lots: dict[Key, int] = defaultdict(int)
        for flow in self.flows:
            item = flow.formal.item
            for site, tiers in flow.formal.stock.items():
                left = {tier + 1: flow.drawn(site, tier + 1) for tier in range(len(tiers.steps))}
                for tier, steps, lot in tiers.rows:
                    taken = min(steps, left[tier])
                    left[tier] -= taken
                    if taken:
                        lots[(site, item, lot)] += taken
            balance: dict[int, int] = defaultdict(int)
            overdrawn = False
            for row, steps in flow.on_lane.items():
                rest = steps - self.used.get((row, item), 0)
                overdrawn = overdrawn or rest < 0
                balance[lanes["origin"][row]] -= rest
                balance[lanes["destination"][row]] += rest
            if overdrawn or any(balance.values()):
                self.wrong("lane_use_wrong", "sources and flow differ", flow.formal.name)
        if lots != self.lots:
            self.wrong("lot_wrong", "not the lots at the head of the stock", "order_lines")

    def _check_shortages(self) -> None:
        """Check the list of what is short."""
        network = self.network
        expected = [
            (line["reference"], line["site"], line["item"], line["priority"], amount(line["short"]))
            for line in self.plan["order_lines"]
            if amount(line["short"]) > 0
        ]
        kept = []
        for flow in self.flows:
            for (site, group), steps in flow.of("short").items():
                if group is None:
                    priority = flow.formal.stock[site].keep_priority
                    kept.append((site, flow.formal.item, priority, steps * flow.formal.step))
        for site, item, priority, quantity in sorted(kept):
            ends = (network.sites[site]["id"], network.items[item]["id"])
            expected.append((None, *ends, priority, quantity))
        fields = ("reference", "site", "item", "priority")
        stated = []
        for entry in self.plan["shortages"]:
            stated.append((*(entry[field] for field in fields), amount(entry["quantity"])))
            if ("kept" in entry) != (entry["reference"] is None):
                self.wrong("shortage_wrong", "kept is for stock that stays", "shortages")
        if stated != expected:
            self.wrong("shortage_wrong", "not what order lines are short of", "shortages")

    def _check_plan_lines(self) -> None:
        """Check the order of plan lines and all their costs."""
        fields = ("origin", "destination", "item", "departs", "lane")
        keys_ = [
            tuple((line.document.get(f) or "").encode() for f in fields) for line in self.lines
        ]
        if not rises(keys_):
            self.wrong("plan_line_wrong", "not sorted", "plan_lines")
        supply: dict[Key, Fraction] = defaultdict(Fraction)
        for line in self.lines:
            if not self._is_priced(line):
                self.wrong("plan_line_wrong", "its costs do not follow", line.place)
            supply[(line.origin, line.item)] += amount(line.document["supply_cost"])
        local = {(line.origin, line.item) for line in self.lines if line.row < 0}
        if local != set(self.local):
            self.wrong("plan_line_wrong", "goods used where they are drawn", "plan_lines")
        for flow in self.flows:
            formal = flow.formal
            for site, tiers in formal.stock.items():
                money = sum(
                    flow.drawn(site, tier) * formal.step * cost
                    for tier, cost in enumerate(tiers.costs, 1)
                )
                if supply[(site, formal.item)] != money:
                    self.wrong("plan_line_wrong", "not the cost of what is drawn", formal.name)

    def _is_priced(self, line: PlanLine) -> bool:
        """Return whether the ends and every cost of a plan line are right."""
        document, lanes, flow = line.document, self.network.lanes, self.flows[line.item]
        sites, name, step = self.network.sites, flow.formal.name, flow.formal.step
        quantity, unit_cost, charged = amount(document["quantity"]), Fraction(0), Fraction(0)
        handling = quantity * sites[line.origin]["handling"](name)
        if line.row < 0:
            first = quantity / step
            right = line.origin == line.destination
            right = right and first == self.local.get((line.origin, line.item), 0)
        else:
            unit_cost = self.transport(line.row, flow, flow.on_lane[line.row]) / quantity
            charged = quantity * flow.formal.charge(line.row)
            first = Fraction(self.first.get((line.row, line.item), 0))
            consumed = self.last.get((line.row, line.item), 0) * step
            handling += consumed * sites[line.destination]["handling"](name)
            ends = (lanes["origin"][line.row], lanes["destination"][line.row])
            right = ends == (line.origin, line.destination)
        supply, transport = amount(document["supply_cost"]), quantity * unit_cost
        site, tiers = line.origin, flow.formal.stock.get(line.origin, Tiers())
        pile = [(cost * step, flow.drawn(site, tier)) for tier, cost in enumerate(tiers.costs, 1)]
        # Tiers of later days may be cheaper: what is drawn first is not known then.
        pile.sort()
        return (
            right
            and cost_of_first(pile, first) <= supply <= cost_of_first(pile[::-1], first)
            and amount(document["unit_cost"]) == unit_cost
            and amount(document["transport_cost"]) == transport
            and amount(document["handling_cost"]) == handling
            and amount(document["charges"]) == charged
            and amount(document["cost"]) == transport + supply + handling + charged
        )

    def _check_currencies(self) -> None:
        """Check what is paid in other currencies, line by line and in all, and each charge."""
        worth, spent = self.network.worth, self._spent_on_lanes()
        for flow in self.flows:
            for (site, tier, *_), steps in flow.of("draw").items():
                code, money = flow.formal.stock[site].stated[tier - 1]
                if code is not None:
                    spent[(code, "supply")] += steps * flow.formal.step * money
        expected = []
        for rate in self.network.head.get("exchange_rates", ()):
            code, names = rate["currency"], ("supply", "transport", "charges")
            sums = {name: spent[(code, name)] for name in names}
            total = sum(sums.values())
            if any(sums.values()):
                row = {"currency": code, **sums, "amount": total, "converted": total * worth[code]}
                row.update({"rate": Fraction(rate["rate"]), "per": Fraction(rate.get("per", "1"))})
                row.update({name: rate.get(name) for name in ("as_of", "source")})
                expected.append(row)
        listed = self.plan.get("currencies")
        right = (listed is not None) == ("exchange_rates" in self.network.head)
        if not right or [with_numbers(row) for row in listed or ()] != expected:
            self.wrong("total_wrong", "not what is paid in other currencies", "currencies")

    def _spent_on_lanes(self) -> dict[Key, Fraction]:
        """Check what plan lines say of other currencies and charges; return it by currency."""
        worth = self.network.worth
        spent: dict[Key, Fraction] = defaultdict(Fraction)
        for line in self.lines:
            quantity = amount(line.document["quantity"])
            expected: dict[str, Any] = {}
            currency, money = self._own_transport(line, quantity)
            if currency is not None:
                expected["stated"] = {"currency": currency, "transport_cost": money}
                spent[(currency, "transport")] += money
            due = [] if line.row < 0 else self.network.charges_on(line.row, line.item)
            parts: list[dict[str, Any]] = []
            for name, code, per in due:
                part = {"name": name, "cost": quantity * per * worth[code]}
                if code is not None:
                    part.update({"currency": code, "stated_cost": quantity * per})
                    spent[(code, "charges")] += quantity * per
                parts += [part] if per else []
            if parts:
                expected["charge_parts"] = parts
            said: dict[str, Any] = {}
            if "stated" in line.document:
                said["stated"] = with_numbers(line.document["stated"])
            if "charge_parts" in line.document:
                said["charge_parts"] = [with_numbers(one) for one in line.document["charge_parts"]]
            if said != expected:
                self.wrong("plan_line_wrong", "not what its lane charges", line.place)
        return spent

    def _own_transport(self, line: PlanLine, quantity: Fraction) -> tuple[str | None, Fraction]:
        """Return the other currency that transport is paid in, None if there is none, and money."""
        if line.row < 0:
            return None, Fraction(0)
        tariff = self.network.tariff(line.row)
        if tariff is not None:
            measured = tariff.measure(self.network, [(line.item, quantity)])
            return tariff.currency, tariff.price(measured)[1]
        currency = self.network.lanes["currency"][line.row]
        return currency, quantity * self.stated_money(line.row, line.item)

    def _bill(self, tariff: Tariff, load: list[tuple[int, Fraction]]) -> dict[str, Any]:
        """Return how the freight of a lane comes about."""
        measured = tariff.measure(self.network, load)
        parts, due = tariff.price(measured)
        return {
            "tariff": tariff.id,
            **{name: tariff.document.get(name) for name in ("version", "source", "basis")},
            "currency": tariff.currency or self.network.head["currency"],
            "measured": measured,
            "charged": sum(quantity for _, quantity, _ in parts),
            "rate": parts[-1][2] if parts else Fraction(0),
            "parts": [
                {"from": start, "quantity": each, "rate": rate, "amount": each * rate}
                for start, each, rate in parts
            ],
            "minimum_charge": tariff.least,
            "surcharge_percent": tariff.more,
            "amount": due,
            "cost": due * self.network.worth[tariff.currency],
        }

    def _check_consignments(self) -> None:
        """Check what is on each lane."""
        network, lanes = self.network, self.network.lanes
        loads = defaultdict(list)
        loads_at: dict[int, list[tuple[int, Fraction]]] = defaultdict(list)
        for flow in self.flows:
            for row, steps in flow.on_lane.items():
                item = network.items[flow.formal.item]
                loads[row].append((item, steps * flow.formal.step))
                loads_at[row].append((flow.formal.item, steps * flow.formal.step))
        costs: dict[int, Fraction] = defaultdict(Fraction)
        for line in self.lines:
            costs[line.row] += amount(line.document["transport_cost"])
            costs[line.row] += amount(line.document["charges"])
        expected = []
        for row, load in sorted(loads.items(), key=lambda pair: pair[0]):
            pallets = total_of(load, per_pallet)
            expected.append(
                {
                    "lane": network.lane_name(row),
                    "carrier": lanes["carrier"][row],
                    "origin": network.sites[lanes["origin"][row]]["id"],
                    "destination": network.sites[lanes["destination"][row]]["id"],
                    **network.dates_of(row),
                    "pallets": pallets,
                    "weight_kg": total_of(load, lambda item: item.get("weight_kg")),
                    "volume_m3": total_of(load, lambda item: item.get("volume_m3")),
                    "cost": costs[row],
                    "order_references": sorted(self.references[row], key=str.encode),
                }
            )
            tariff = network.tariff(row)
            if tariff is not None:
                expected[-1]["freight"] = self._bill(tariff, loads_at[row])
        stated = []
        for entry in self.plan["consignments"]:
            numbers = {
                field: entry[field] if entry[field] == "unknown" else amount(entry[field])
                for field in ("pallets", "weight_kg", "volume_m3", "cost")
            }
            stated.append({**entry, **numbers})
            if "freight" in entry:
                said = with_numbers({k: v for k, v in entry["freight"].items() if k != "parts"})
                said["parts"] = [with_numbers(part) for part in entry["freight"]["parts"]]
                stated[-1]["freight"] = said
        if stated != expected:
            self.wrong("consignment_wrong", "not what is on the lanes", "consignments")


def with_numbers(document: dict[str, Any]) -> dict[str, Any]:
    """Return an object of texts with the amounts in it as numbers."""
    words = ("name", "currency", "as_of", "source", "tariff", "version", "basis")
    return {key: text if key in words else amount(text) for key, text in document.items()}


def adds_up(document: dict[str, Any]) -> bool:
    """Return whether an order line adds up: sources, what is served, and what is short."""
    served, short = amount(document["served"]), amount(document["short"])
    sources = document["sources"]
    ways = {
        (
            source["origin"],
            source["lot"],
            source.get("arrives"),
            *((leg["lane"], leg.get("departs")) for leg in source["legs"]),
        )
        for source in sources
    }
    return (
        min(served, short) >= 0
        and served + short == amount(document["quantity"])
        and sum(amount(source["quantity"]) for source in sources) == served
        and len(ways) == len(sources)
    )


def rounded_forms(total: Fraction, currency: str) -> list[str]:
    """Return the total in the smallest unit of a currency, half away from zero; 0 has two forms."""
    decimals = next((number for number, codes in CURRENCIES.items() if currency in codes), None)
    if decimals is None:
        return []
    units = abs(total) * 10**decimals
    digits = str((2 * units.numerator + units.denominator) // (2 * units.denominator))
    digits = digits.rjust(decimals + 1, "0")
    text = digits if decimals == 0 else f"{digits[:-decimals]}.{digits[-decimals:]}"
    return [text, "-" + text] if not int(digits) else [text if total >= 0 else "-" + text]


def cost_of_first(pile: list[tuple[Fraction, int]], steps: Fraction) -> Fraction:
    """Return what the first steps of a pile cost, which is a list of (cost of one, number)."""
    cost = Fraction(0)
    for each, there in pile:
        taken = min(steps, Fraction(there))
        cost, steps = cost + taken * each, steps - taken
    return cost


def per_pallet(item: dict[str, Any]) -> Fraction | None:
    """Return how many pallets one unit of an item is, None if it does not say."""
    return 1 / item["packs"]["pallet"] if "pallet" in item["packs"] else None


def total_of(load: list[tuple[dict[str, Any], Fraction]], per_unit: Value) -> Fraction | str:
    """Return the sum of quantity times a measure, unknown if an item does not have it."""
    total = Fraction(0)
    for item, quantity in load:
        per = per_unit(item)
        if per is None:
            return "unknown"
        total += quantity * per
    return total


# ------------------------------------------------------------------ the verdict

NEEDED = (
    "README.txt certificate.json history.json network/head.json options.json plan.json verify.py"
)


def read_manifest(data: bytes) -> dict[str, str]:
    """Return the digest of each entry that the manifest names."""
    manifest = parse_canonical(data)
    formats = keys("certificate event network plan", (1,))
    shape = {"format": (1,), "formats": formats, "versions": "texts", "entries": "texts"}
    need(has_shape(manifest, shape), "not a manifest of this format")
    entries: dict[str, str] = manifest["entries"]
    need(all(KINDS["digest"](value) for value in entries.values()), "not a digest")
    need(set(NEEDED.split()) <= set(entries), "the manifest leaves something out")
    return entries


def check_entries(entries: dict[str, bytes], report: Report) -> None:
    """Check the entries of the evidence, whose digests are those of the manifest."""
    parts = {name: data for name, data in entries.items() if name.startswith("network/")}
    values: dict[str, Any] = {}
    for name, code, read in (
        ("network", "network_malformed", lambda: Network(parts)),
        ("options", "options_malformed", lambda: read_options(entries["options.json"])),
        ("plan", "plan_malformed", lambda: parse(entries["plan.json"])),
        ("certificate", "certificate_malformed", lambda: parse(entries["certificate.json"])),
        ("history", "history_malformed", lambda: parse(entries["history.json"])),
    ):
        try:
            values[name] = read()
        except Bad as error:
            report.add(code, str(error), name)
    if "history" in values:
        check_history(values.pop("history"), report)
    if len(values) < 4:
        return
    proof = Report()
    audit = Audit(
        values["network"], values["options"], values["plan"], values["certificate"], proof
    )
    audit.run(sha256(entries["network/head.json"]), sha256(entries["options.json"]))
    report.problems += proof.problems


def verify(data: bytes) -> tuple[str, list[tuple[str, str, str]]]:
    """Return the verdict on the bytes of an evidence zip, and its problems."""
    report = Report()
    code = "zip_unreadable"
    try:
        entries, damaged = unzip(data)
        code = "manifest_malformed"
        listed = read_manifest(entries.pop("manifest.json", b""))
    except Bad as error:
        report.add(code, str(error))
        return "unreadable", report.problems
    for name in damaged:
        report.add("entry_changed", "its check sum is wrong", name)
    for name in sorted(set(listed) | set(entries)):
        if name not in entries:
            report.add("entry_missing", "the manifest names it", name)
        elif name not in listed:
            report.add("entry_unknown", "the manifest does not name it", name)
        elif sha256(entries[name]) != listed[name]:
            report.add("entry_changed", "it does not have its digest", name)
    if not report.problems:
        check_entries(entries, report)
    return ("broken" if report.problems else "intact"), report.problems


def main(arguments: list[str]) -> int:
    """Verify the file that is named, print what was found, and return the exit code."""
    if len(arguments) != 1 or arguments[0] in ("-h", "--help"):
        print("usage: python3 verify.py EVIDENCE.zip", file=sys.stderr)  # noqa: T201 - a program
        return 0 if arguments in (["-h"], ["--help"]) else 2
    try:
        with open(arguments[0], "rb") as file:  # noqa: PTH123 - one less import for a reader
            data = file.read()
    except OSError as error:
        print(f"unreadable: {error.strerror}")  # noqa: T201 - a program
        return 2
    verdict, problems = verify(data)
    for code, detail, place in problems:
        line = f"{code}: {detail} [{place}]"
        print(line.encode("ascii", "backslashreplace").decode())  # noqa: T201 - a program
    print(verdict)  # noqa: T201 - a program
    return ("intact", "broken", "unreadable").index(verdict)


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
