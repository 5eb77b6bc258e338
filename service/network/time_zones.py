"""Points in time as the clocks at a site show them.

A departure counts on the date that people at its origin call it, and an arrival on that of its
destination. So an instant is kept with the offset that held at its site, and its first ten
characters are that date for good: whoever reads it needs no time zone database.
"""

from datetime import UTC, datetime, timedelta
from functools import lru_cache
from importlib import resources
from zoneinfo import ZoneInfo

import numpy as np

from service.network.columns import CodeArray, Site, Texts
from service.network.moments import read_instant

_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
_MINUTE = timedelta(minutes=1)


@lru_cache(maxsize=1024)
def _zone(name: str) -> ZoneInfo:
    """Return a time zone by the rules of the tzdata package, never by those of the machine.

    The package is locked, so that one network has one normal form on every machine.
    """
    *folders, file = name.split("/")
    package = ".".join(("tzdata.zoneinfo", *folders))
    with resources.files(package).joinpath(file).open("rb") as rules:
        return ZoneInfo.from_file(rules, key=name)


def at_zone(text: str, zone: str | None) -> str:
    """Return RFC 3339 ``text`` with the offset that holds in ``zone`` (None: as it stands)."""
    instant = read_instant(text)
    if zone is None:
        return instant.local
    whole, rest = divmod(instant.nanoseconds, 10**9)
    local = (_EPOCH + timedelta(seconds=whole)).astimezone(_zone(zone))
    offset = local.utcoffset() or timedelta(0)
    if offset % _MINUTE:
        # Local mean time of long ago: RFC 3339 has no seconds in an offset.
        return instant.local
    fraction = f".{rest:09d}".rstrip("0") if rest else ""
    plain = local.replace(tzinfo=None).isoformat(timespec="seconds")
    if not offset:
        return f"{plain}{fraction}Z"
    minutes = abs(offset) // _MINUTE
    sign = "-" if offset < timedelta(0) else "+"
    return f"{plain}{fraction}{sign}{minutes // 60:02d}:{minutes % 60:02d}"


def at_sites(moments: Texts, site: CodeArray, sites: tuple[Site, ...]) -> Texts:
    """Return a column of instants as the clocks at each row's site (shape (rows,)) show them."""
    zones = sorted({known.time_zone for known in sites if known.time_zone is not None})
    if not moments.values or not zones:
        return moments
    rank = {zone: number for number, zone in enumerate(zones)}
    # The last entry, -1, is that of a site without a zone and of a row without a known site.
    of_site = np.array(
        [*(-1 if known.time_zone is None else rank[known.time_zone] for known in sites), -1],
        dtype=np.int64,
    )
    zone_of_row = of_site[np.where(site >= 0, site, -1)]
    given = np.flatnonzero(moments.codes >= 0)
    pairs = moments.codes[given].astype(np.int64) * (len(zones) + 1) + zone_of_row[given] + 1
    distinct, position = np.unique(pairs, return_inverse=True)
    spelled = [
        at_zone(
            moments.values[pair // (len(zones) + 1)],
            None if pair % (len(zones) + 1) == 0 else zones[pair % (len(zones) + 1) - 1],
        )
        for pair in distinct.tolist()
    ]
    values = sorted(set(spelled))
    number = {text: place for place, text in enumerate(values)}
    codes = np.full(len(moments.codes), -1, dtype=np.int32)
    codes[given] = np.array([number[text] for text in spelled], dtype=np.int32)[position]
    return Texts(codes=codes, values=tuple(values))
