"""How plans are compared: by what they achieve, item by item, in the order of what matters."""

from collections.abc import Mapping
from fractions import Fraction

from tests.factories import Document, Planned
from tests.oracle_problem import ItemAnswer
from tests.oracles import Answers

# Quantity by origin, destination, item and the id of the lane where it was given one.
Flows = dict[tuple[str, str, str, str | None], Fraction]


def achieved(planned: Planned) -> Answers:
    """Return what a plan is short of by priority and costs, as its certificate states it."""
    if planned.plan["status"] == "no_plan":
        return {item.id: None for item in planned.network.items}
    shortages: dict[str, dict[int, Fraction]] = {item.id: {} for item in planned.network.items}
    costs: dict[str, Fraction] = {}
    for step in planned.certificate["steps"]:
        value = Fraction(step["achieved"])
        if step["of"] == "cost":
            costs[step["item"]] = value
        else:
            shortages[step["item"]][step["priority"]] = value
    return {
        item.id: ItemAnswer(item=item.id, shortages=shortages[item.id], cost=costs[item.id])
        for item in planned.network.items
    }


def rank(answer: ItemAnswer | None) -> tuple[Fraction | float, ...]:
    """Return what two answers for the same wishes are compared by: less is better."""
    if answer is None:
        return (float("inf"),)
    return (*(answer.shortages[priority] for priority in sorted(answer.shortages)), answer.cost)


def ranks(answers: Answers) -> dict[str, tuple[Fraction | float, ...]]:
    """Return the same for every item."""
    return {item: rank(answer) for item, answer in answers.items()}


def outcomes(answers: Answers) -> dict[str, tuple[dict[int, Fraction], Fraction] | None]:
    """Return cost and what is short of each item, leaving out priorities of which nothing is."""
    return {
        item: None
        if answer is None
        else ({rank: short for rank, short in answer.shortages.items() if short}, answer.cost)
        for item, answer in answers.items()
    }


def flows(planned: Planned, document: Document) -> Flows:
    """Return what moves, in terms that neither the order nor the names of other things change."""
    given = {lane["id"] for lane in document["lanes"] if "id" in lane}
    moving: Flows = {}
    for line in planned.plan["plan_lines"]:
        if line["lane"] is not None:
            name = line["lane"] if line["lane"] in given else None
            key = (line["origin"], line["destination"], line["item"], name)
            moving[key] = moving.get(key, Fraction(0)) + Fraction(line["quantity"])
    return moving


def shortages_listed(planned: Planned) -> Mapping[tuple[str, int], Fraction]:
    """Return what the plan lists as short, by item and priority; what competes in money is not."""
    listed: dict[tuple[str, int], Fraction] = {}
    for row in planned.plan["shortages"]:
        if row["priority"] is not None:
            key = (row["item"], row["priority"])
            listed[key] = listed.get(key, Fraction(0)) + Fraction(row["quantity"])
    return listed
