"""What shipments on lanes with a tariff cost, priced once more by the tariff itself."""

from collections.abc import Sequence
from fractions import Fraction

from service.network.columns import Network
from service.network.days import day_text
from service.network.freight import freight
from service.network.money import factors
from service.network.quantities import exact_text
from service.network.tariffs import Tariff, departure_day, tariffs_on
from service.planning.documents.amounts import Document, text

_BASES = {"weight_kg": "weight", "volume_m3": "volume"}


class Shipments:
    """Prices what moves on a lane: one item of it, or all goods together."""

    def __init__(self, network: Network) -> None:
        """Look up the money of all tariffs."""
        self._network = network
        self._held: dict[int, dict[str, Tariff]] = {}
        self._worth = factors(network.head)

    def tariff(self, row: int, day: int) -> Tariff | None:
        """Return the tariff of a lane on a day (0 without dates), None if it has a unit cost."""
        name = self._network.lanes.tariff.text(row)
        if name is None:
            return None
        if day not in self._held:
            text_ = day_text(day) if day else departure_day(self._network.head)
            self._held[day] = tariffs_on(self._network.head, text_)
        return self._held[day][name]

    def money(self, tariff: Tariff, item: int, steps: int) -> Fraction:
        """Return what one item pays of a shipment, in the currency of the tariff.

        Where several items go the freight of all is the sum of that of each: others are refused.
        """
        thing = self._network.items[item]
        measured = tariff.measured([(thing, steps * thing.step)])
        assert measured is not None  # noqa: S101 - the intake refuses an item without the measure
        return freight(tariff, measured).amount

    def in_plan_money(self, tariff: Tariff, amount: Fraction) -> Fraction:
        """Return an amount of a tariff in the currency of the plan."""
        return amount * self._worth[tariff.currency]

    def document(self, tariff: Tariff, goods: Sequence[tuple[int, int]]) -> Document:
        """Return how the freight of (item, steps) together comes about, as a bill would say it."""
        items = self._network.items
        measured = tariff.measured(
            [(items[item], steps * items[item].step) for item, steps in goods]
        )
        assert measured is not None  # noqa: S101 - see above
        found = freight(tariff, measured)
        return {
            "tariff": tariff.id,
            "version": tariff.version,
            "source": tariff.source,
            "basis": _BASES.get(tariff.measure, tariff.measure),
            "measured": text(found.measured),
            "charged": text(found.charged),
            "rate": text(found.parts[-1].rate) if found.parts else "0",
            "parts": [
                {
                    "from": text(part.start),
                    "quantity": text(part.quantity),
                    "rate": text(part.rate),
                    "amount": text(part.quantity * part.rate),
                }
                for part in found.parts
            ],
            "minimum_charge": exact_text(tariff.minimum_charge),
            "surcharge_percent": exact_text(tariff.surcharge_percent),
            "currency": tariff.currency or str(self._network.head["currency"]),
            "amount": text(found.amount),
            "cost": text(self.in_plan_money(tariff, found.amount)),
        }
