"""From columns to the formal network of each item, and the method that represents them exactly."""

from dataclasses import dataclass
from fractions import Fraction

from service.network.columns import Network
from service.network.days import is_dated, movements_of
from service.network.options import Options
from service.network.reach import LaneUse
from service.planning.item_arcs import item_arcs
from service.planning.item_network import ItemNetwork
from service.planning.rule_book import RuleBook, rule_book
from service.planning.scaling import cost_scale

METHOD = "min_cost_flow"


@dataclass(frozen=True, slots=True, kw_only=True)
class Compiled:
    """A network ready to solve: one formal network an item, and the scale of all their money."""

    network: Network
    options: Options
    use: LaneUse
    book: RuleBook
    items: tuple[ItemNetwork, ...]
    cost_scale: Fraction
    method: str
    method_reasons: tuple[str, ...]


def compile_network(network: Network, options: Options) -> Compiled:
    """Return the formal networks of all items.

    The method is always ``min_cost_flow``, and no rule forces another: whatever needs one is
    refused at the door until it is built.

    Raises ``NumbersTooLargeError`` where a quantity in steps reaches 2**62.
    """
    use, book = LaneUse(network), rule_book(network)
    movements = movements_of(network) if is_dated(network) else None
    raw = [
        item_arcs(network, options, item, use=use, book=book, movements=movements)
        for item in range(len(network.items))
    ]
    grids = [own.grid() for own in raw]
    # What is charged on a lane is shown by itself, so that it must be whole by itself.
    grids += [own.lanes.charges.grid() for own in raw if own.lanes.charges is not None]
    scale = cost_scale(grids)
    return Compiled(
        network=network,
        options=options,
        use=use,
        book=book,
        items=tuple(own.finish(scale) for own in raw),
        cost_scale=scale,
        method=METHOD,
        method_reasons=(),
    )
