"""What money was before it became the plan's: other currencies, and charges one by one."""

from collections.abc import Mapping, Sequence
from fractions import Fraction

from service.network.columns import Network
from service.network.money import charges_of, exchange_rates, factors
from service.network.quantities import exact_text
from service.network.units import item_units, per_unit
from service.planning.documents.amounts import Document, text
from service.planning.documents.plan_lines import ItemPlan, PlanLine
from service.planning.documents.shipments import Shipments

PARTS = ("supply", "transport", "charges")


class MoneyShown:
    """Adds to plan lines what they are in other currencies and which charges they bear."""

    def __init__(self, network: Network) -> None:
        """Look up what all lanes share."""
        self._network = network
        self._worth = factors(network.head)
        self._shipments = Shipments(network)
        self._charges = [charges_of(charges) for charges in network.lanes.charges.values]
        # By currency and part, in that currency.
        self._spent: dict[tuple[str, str], Fraction] = {}

    def add(self, plan: ItemPlan, documents: Mapping[PlanLine, Document]) -> None:
        """Complete the plan lines of one item, and add up what is paid in other currencies."""
        for line, document in documents.items():
            if line.row >= 0:
                self._lane(plan.solved.own.item, line, document)
        self._supply(plan)

    def currencies(self) -> list[Document]:
        """Return a row for each currency in which something is paid, with the rate that is used."""
        rows: list[Document] = []
        for code, rate in exchange_rates(self._network.head).items():
            amounts = [self._spent.get((code, part), Fraction(0)) for part in PARTS]
            if not any(amounts):
                continue
            total = sum(amounts, Fraction(0))
            rows.append(
                {
                    "currency": code,
                    "rate": exact_text(rate.rate),
                    "per": exact_text(rate.per),
                    "as_of": rate.as_of,
                    "source": rate.source,
                    **{part: text(amount) for part, amount in zip(PARTS, amounts, strict=True)},
                    "amount": text(total),
                    "converted": text(total * rate.of_one),
                }
            )
        return rows

    def _lane(self, item: int, line: PlanLine, document: Document) -> None:
        """Complete the plan line of one lane."""
        lanes, thing = self._network.lanes, self._network.items[item]
        quantity = line.steps * thing.step
        currency = lanes.currency.text(line.row)
        tariff = self._shipments.tariff(line.row, line.departs)
        if tariff is not None:
            document["unit_cost"] = text(Fraction(document["transport_cost"]) / quantity)
            if tariff.currency is not None:
                amount = self._shipments.money(tariff, item, line.steps)
                self._state(document, tariff.currency, amount)
        elif currency is not None:
            measure = per_unit(thing, lanes.measure.values[lanes.measure.codes[line.row]])
            rate = lanes.unit_cost.fraction(line.row)
            assert rate is not None  # noqa: S101 - the intake refuses a lane without a cost
            assert measure is not None  # noqa: S101 - and one whose measure says nothing
            self._state(document, currency, quantity * measure * rate)
        code = int(lanes.charges.codes[line.row])
        parts: list[Document] = []
        for charge in self._charges[code] if code >= 0 else ():
            amount = (charge.per_item_unit(thing) or Fraction(0)) * quantity
            if not charge.concerns(thing) or not amount:
                continue
            cost = text(amount * self._worth[charge.currency])
            part: Document = {"name": charge.name, "cost": cost}
            if charge.currency is not None:
                part |= {"currency": charge.currency, "stated_cost": text(amount)}
                self._spend(charge.currency, "charges", amount)
            parts.append(part)
        if parts:
            document["charge_parts"] = parts

    def _state(self, document: Document, currency: str, amount: Fraction) -> None:
        """Say on a plan line what its transport costs in another currency."""
        self._spend(currency, "transport", amount)
        document["stated"] = {"currency": currency, "transport_cost": text(amount)}

    def _supply(self, plan: ItemPlan) -> None:
        """Add up what stock costs that is priced in another currency."""
        supply, own = self._network.supply, plan.solved.own
        if not supply.currency.values:
            return
        thing = self._network.items[own.item]
        rows = own.stock.rows.tolist()
        for path in plan.paths.paths:
            row = rows[path.row]
            currency, cost = supply.currency.text(row), supply.unit_cost.fraction(row)
            if currency is None or not cost:
                continue
            units = item_units(thing, supply.unit.values[supply.unit.codes[row]])
            assert units is not None  # noqa: S101 - the intake refuses an unknown unit
            self._spend(currency, "supply", path.steps * thing.step / units * cost)

    def _spend(self, currency: str, part: str, amount: Fraction) -> None:
        """Add an amount of a currency to one part of the cost."""
        key = (currency, part)
        self._spent[key] = self._spent.get(key, Fraction(0)) + amount


def shows_money(network: Network) -> bool:
    """Return whether anything is paid in another currency, charged, or paid by a tariff."""
    lanes, supply = network.lanes, network.supply
    columns = (lanes.currency, lanes.charges, lanes.tariff, supply.currency)
    return any(column.values for column in columns)


def currencies_of(network: Network, shown: MoneyShown) -> Mapping[str, Sequence[Document]]:
    """Return the table ``currencies``; nothing for a network without exchange rates."""
    return {"currencies": shown.currencies()} if "exchange_rates" in network.head else {}
