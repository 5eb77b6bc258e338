"""Two independent judges of cost and shortages: linear programs (HiGHS) and network simplex.

Both serve priorities one after the other (the shortage of the first as small as can be, capped
there, then the next, then the cost), where the service weighs them in one solve. They share only
how the document is read (``oracle_reading.py``), and nothing with the service.
"""

from collections.abc import Mapping

from tests.oracle_problem import ItemAnswer
from tests.oracle_programs import has_one_best_plan, solve_programs
from tests.oracle_reading import Document, read_items
from tests.oracle_simplex import solve_simplex

Answers = Mapping[str, ItemAnswer | None]


def by_linear_programs(document: Document, **options: str) -> Answers:
    """Return the best answer of each item by HiGHS, or None where an item has no plan."""
    shortages = options.get("shortages", "allow") == "allow"
    return {
        problem.item: solve_programs(problem, shortages=shortages)
        for problem in read_items(document, options)
    }


def is_only_plan(document: Document, **options: str) -> bool:
    """Return whether there is a plan, and no other one as good ships otherwise on some lane."""
    shortages = options.get("shortages", "allow") == "allow"
    return all(
        has_one_best_plan(problem, shortages=shortages) for problem in read_items(document, options)
    )


def by_network_simplex(document: Document, **options: str) -> Answers:
    """Return the best answer of each item by networkx, or None where an item has no plan."""
    shortages = options.get("shortages", "allow") == "allow"
    return {
        problem.item: solve_simplex(problem, shortages=shortages)
        for problem in read_items(document, options)
    }
