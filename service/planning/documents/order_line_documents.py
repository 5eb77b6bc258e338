"""The table of order lines: what each wanted, what it gets, and from where."""

import json
from collections.abc import Mapping, Sequence

from service.network.columns import Network, Texts
from service.network.days import day_text, days_of
from service.planning.documents.amounts import Document, text, texts
from service.planning.documents.order_lines import Share
from service.planning.documents.plan_lines import ItemPlan
from service.planning.model.bounds import LaneBounds
from service.planning.model.groups import IN_MONEY, NEVER

# Where a part of an order line comes from: site, lot and legs.
_Source = tuple[int, str | None, tuple[int, ...], int]


def order_line_documents(
    network: Network,
    plan: ItemPlan,
    shares: Mapping[int, list[Share]],
    served: Mapping[int, int],
) -> dict[int, Document]:
    """Return the order lines of one item by their row in the network's demand."""
    own, demand = plan.solved.own, network.demand
    groups, item = own.groups, network.items[own.item]
    rows, wanted = groups.rows.tolist(), groups.row_steps.tolist()
    sources = _Sources(network, plan).of([shares.get(row, ()) for row in rows])
    sites = [site.id for site in network.sites]
    columns = zip(
        rows,
        demand.reference[groups.rows].tolist(),
        demand.order.codes[groups.rows].tolist(),
        demand.site[groups.rows].tolist(),
        texts(wanted, item.step),
        texts([served[row] for row in rows], item.step),
        texts([steps - served[row] for row, steps in zip(rows, wanted, strict=True)], item.step),
        groups.row_priority.tolist(),
        groups.row_exact.equals(groups.row_steps).tolist(),
        sources,
        strict=True,
    )
    dated = own.layout.places.day is not None
    due = days_of(demand.due, absent=NEVER) if dated else None
    documents: dict[int, Document] = {}
    for at, (
        row,
        reference,
        order,
        site,
        quantity,
        goes,
        short,
        priority,
        exact,
        own_sources,
    ) in enumerate(columns):
        line: Document = {
            "reference": reference.decode(),
            "order": None if order < 0 else demand.order.values[order],
            "site": sites[site],
            "item": item.id,
            "quantity": quantity,
            "served": goes,
            "short": short,
            "priority": None if priority == IN_MONEY else priority,
        }
        if priority == IN_MONEY:
            line["shortage_cost"] = text(groups.row_money.fraction(at) / item.step)
        if not exact:
            line["ordered"] = text(groups.row_exact.fraction(at) * item.step)
        line["sources"] = own_sources
        if due is not None:
            late = (path.arrives - due[row] for path, _ in shares.get(row, ()))
            line["days_late"] = max(0, int(max(late, default=0)))
        documents[row] = line
    for name, column in (
        ("earliest", demand.earliest),
        ("due", demand.due),
        ("latest", demand.latest),
        ("tags", demand.tags),
        ("extra", demand.extra),
    ):
        _echo(documents, name, column, plain=name not in {"tags", "extra"})
    return documents


def _echo(documents: Mapping[int, Document], name: str, column: Texts, *, plain: bool) -> None:
    """Put what a column says of order lines into their documents; it is JSON unless plain."""
    if not column.values:
        return
    for row, document in documents.items():
        value = column.text(row)
        if value is not None:
            document[name] = value if plain else json.loads(value)


class _Sources:
    """Writes where order lines of one item get their goods from."""

    def __init__(self, network: Network, plan: ItemPlan) -> None:
        """Look up what every source needs."""
        own = plan.solved.own
        item = network.items[own.item]
        self._item, self._step, self._names = item.id, item.step, plan.names
        self._dated = own.layout.places.day is not None
        self._legs = {lane: self._leg(own.lanes, lane) for lane in plan.names}
        self._sites = [site.id for site in network.sites]
        lots = network.supply.lot
        codes = lots.codes[own.stock.rows].tolist()
        self._lots = [None if code < 0 else lots.values[code] for code in codes]

    def _leg(self, lanes: LaneBounds, lane: int) -> Document:
        """Return one leg as it is shown."""
        leg: Document = {"lane": self._names[lane]}
        if lanes.departs is not None and lanes.arrives is not None:
            leg["departs"] = day_text(int(lanes.departs[lane]))
            leg["arrives"] = day_text(int(lanes.arrives[lane]))
        return leg

    def of(self, shares: Sequence[Sequence[Share]]) -> list[list[Document]]:
        """Return the sources of each order line, those alike in origin, lot and legs as one."""
        together = [self._together(own) for own in shares]
        # One call for all quantities: there are few in a line, and many lines.
        steps = [amount for own in together for amount in own.values()]
        quantities = iter(texts(steps, self._step))
        return [
            [
                {
                    "origin": self._sites[site],
                    "item": self._item,
                    "lot": lot,
                    "quantity": next(quantities),
                    "legs": [dict(self._legs[leg]) for leg in legs],
                    **({"arrives": day_text(arrives)} if self._dated else {}),
                }
                for site, lot, legs, arrives in own
            ]
            for own in together
        ]

    def _together(self, shares: Sequence[Share]) -> dict[_Source, int]:
        """Return the steps of one order line by origin, lot, legs and arrival."""
        together: dict[_Source, int] = {}
        for path, steps in shares:
            key = (path.site, self._lots[path.row], path.legs, path.arrives)
            together[key] = together.get(key, 0) + steps
        return together
