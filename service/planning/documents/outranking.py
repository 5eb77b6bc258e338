"""Which order line, of those that went first, is the largest, and how many did."""

from collections.abc import Mapping

from service.network.columns import Network
from service.planning.documents.amounts import text
from service.planning.documents.bottlenecks import Bottlenecks
from service.planning.model.arcs import Kind
from service.planning.model.groups import IN_MONEY
from service.planning.solve import ItemFlow

# (steps served, negative; position in the rows of the groups): sorted, the largest line comes
# first, and of equal ones that with the smallest reference.
Line = tuple[int, int]


class Outranking:
    """Names who went first at one item; what shares a bottleneck and a rank is asked once."""

    def __init__(
        self,
        network: Network,
        solved: ItemFlow,
        bottlenecks: Bottlenecks,
        *,
        served: Mapping[int, int],
    ) -> None:
        """Gather the served lines of every group; ``served`` has steps by demand row."""
        self._network = network
        self._own = solved.own
        self._bottlenecks = bottlenecks
        self._known: dict[tuple[frozenset[int], tuple[int, int]], list[Line]] = {}
        self._lines: dict[int, list[Line]] = {}
        groups = solved.own.groups
        for at, (row, group) in enumerate(
            zip(groups.rows.tolist(), groups.row_group.tolist(), strict=True)
        ):
            if group >= 0 and served[row]:
                self._lines.setdefault(group, []).append((-served[row], at))

    def ahead_of(self, short_arc: int, *, itself: int | None) -> dict[str, object] | None:
        """Return the largest line that went first, and how many did; None where none did.

        ``itself`` is the position of the short line where a part of it is served: it does not
        count among those that went before it.
        """
        lines = self._ahead(short_arc)
        others = [line for line in lines[:2] if line[1] != itself]
        if not others:
            return None
        steps, at = others[0]
        groups = self._own.groups
        priority = int(groups.row_priority[at])
        reference: bytes = self._network.demand.reference[groups.rows[at]]
        return {
            "reference": reference.decode(),
            "quantity": text(-steps * self._network.items[self._own.item].step),
            "priority": None if priority == IN_MONEY else priority,
            "lines": len(lines) - (itself is not None),
        }

    def _ahead(self, short_arc: int) -> list[Line]:
        """Return all served lines of equal or higher rank in a short demand's bottleneck."""
        place, rank = self._bottlenecks.place_of(short_arc), self._bottlenecks.rank(short_arc)
        if (place, rank) not in self._known:
            self._known[place, rank] = sorted(
                line
                for arc in self._bottlenecks.went_first(place, rank)
                if self._own.kind[arc] == Kind.SHORT
                for line in self._lines.get(int(self._own.subject[arc]), ())
            )
        return self._known[place, rank]
