"""Rows of ``storage`` as sent, checked against sites and items and brought into normal form."""

from collections.abc import Sequence

from service.network.definition import StoragePart
from service.network.faults import FaultList, pointer
from service.network.storage import FIELD
from service.network.things import Things


def read_storage(
    rows: Sequence[StoragePart], things: Things, faults: FaultList
) -> list[dict[str, str]]:
    """Return the rows in normal form, sorted; report those that name what is not there."""
    docks = things.with_role("cross_dock")
    by_id = {site.id: place for place, site in enumerate(things.sites)}
    found: dict[tuple[bytes, bytes], dict[str, str]] = {}
    for place, row in enumerate(rows):
        if row.site not in things.site_positions:
            detail = "There is no site of this id. Add it to the network, or correct the id."
            faults.add(pointer(FIELD, place, "site"), "unknown_site", detail, row.site)
        elif row.site in by_id and not docks[by_id[row.site]]:
            detail = "No cross_dock: stock waits where it lies, and a ship_to keeps what it gets."
            faults.add(pointer(FIELD, place, "site"), "role_missing", detail, row.site)
        if row.item is not None and row.item not in things.item_positions:
            detail = "There is no item of this id. Add it to the network, or correct the id."
            faults.add(pointer(FIELD, place, "item"), "unknown_item", detail, row.item)
        key = row.site.encode(), (row.item or "").encode()
        if key in found:
            detail = "Another row is of this site and item. Keep one of them."
            faults.add(pointer(FIELD, place), "duplicate_value", detail, row.site)
        found[key] = {"site": row.site} | ({} if row.item is None else {"item": row.item})
    return [found[key] for key in sorted(found)]
