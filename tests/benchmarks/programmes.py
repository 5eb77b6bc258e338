"""What is measured: a quick look, the standard, and everything."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Final

from tests.benchmarks.forms import FORMS
from tests.benchmarks.instances import Change, Recipe

# Sizes by the number of lanes in thousands: warehouses, ship-tos.
SIZES: Final[Mapping[int, tuple[int, int]]] = {
    10: (10, 1_000),
    100: (50, 2_000),
    1_000: (200, 5_000),
    10_000: (500, 20_000),
}
# Beyond these a general solver would take longer than all the rest together.
NETWORKX_LANES_MAX = 100_000
HIGHS_LANES_MAX = 100_000
HIGHS_LANES_MAX_LONG = 1_000_000

ALL_FORMS = tuple(FORMS)
CHANGES: Final[tuple[Change, ...]] = ("demand 10 %", "demand 50 %", "outage", "costs 5 %")


@dataclass(frozen=True, slots=True, kw_only=True)
class Case:
    """One network: how often it is solved, by whom, and what follows.

    ``forms`` go through the whole pipeline as often as ``repetitions``; ``changes`` are planned
    warm, from what the plan of the network itself left.
    """

    recipe: Recipe
    repetitions: int = 3
    rivals: tuple[str, ...] = ()
    forms: tuple[str, ...] = ()
    changes: tuple[Change, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class Serving:
    """What is sent to a real service.

    Each of ``forms`` ``repetitions`` times to a service of its own; ``small`` as a cost table
    ``small_repetitions`` times to one service; ``watched`` is the form that is taken in while
    ``/healthz`` is asked.
    """

    recipe: Recipe
    small: Recipe
    repetitions: int
    small_repetitions: int
    forms: tuple[str, ...] = ALL_FORMS
    watched: str = "rows"
    watched_repetitions: int = 3


@dataclass(frozen=True, slots=True, kw_only=True)
class Programme:
    """All that one run measures; it ends by itself after ``minutes`` and says what is missing."""

    name: str
    minutes: int
    cases: tuple[Case, ...]
    netgen: tuple[str, ...]
    serving: Serving | None = field(default=None)


def sized(thousands: int, seed: int, **special: object) -> Recipe:
    """Return the recipe of a size."""
    warehouses, ship_tos = SIZES[thousands]
    return Recipe(warehouses=warehouses, ship_tos=ship_tos, seed=seed, **special)  # type: ignore[arg-type] # its own fields


def _rivals(thousands: int, *, long: bool) -> tuple[str, ...]:
    """Return the solvers that are asked beside OR-Tools and LEMON."""
    lanes = thousands * 1_000
    highs_max = HIGHS_LANES_MAX_LONG if long else HIGHS_LANES_MAX
    return tuple(
        name
        for name, most in (("networkx", NETWORKX_LANES_MAX), ("SciPy HiGHS", highs_max))
        if lanes <= most
    )


def _hard(thousands: int, *, seed: int, repetitions: int, long: bool) -> tuple[Case, ...]:
    """Return the networks on which a shortlist is hard to find."""
    specials: tuple[dict[str, object], ...] = (
        {"supply_ratio": 100},
        {"supply_ratio": 84},
        {"costs": "ties"},
    )
    rivals = _rivals(thousands, long=long)
    return tuple(
        Case(
            recipe=sized(thousands, seed + number, **special),
            repetitions=repetitions,
            rivals=rivals,
        )
        for number, special in enumerate(specials)
    )


_NETGEN_FEW = ("klingman74-05-c100", "klingmanmote87-110")
_NETGEN = (
    "klingman74-01-c10000",
    "klingman74-05-c100",
    "klingman74-11-c10000",
    "klingman74-20-c10000",
    "klingman74-24-c100",
    "klingmanmote87-101",
    "klingmanmote87-110",
    "klingmanmote87-121",
)

QUICK: Final = Programme(
    name="quick",
    minutes=10,
    cases=(
        Case(recipe=sized(10, 101), repetitions=1, rivals=_rivals(10, long=False)),
        Case(
            recipe=sized(100, 101),
            rivals=_rivals(100, long=False),
            forms=ALL_FORMS,
            changes=("demand 10 %",),
        ),
        Case(recipe=sized(100, 111, capped=30), rivals=("SciPy HiGHS",)),
        *_hard(100, seed=121, repetitions=1, long=False),
    ),
    netgen=_NETGEN_FEW,
    serving=Serving(
        recipe=sized(100, 101),
        small=sized(10, 101),
        repetitions=1,
        small_repetitions=5,
        watched_repetitions=1,
    ),
)


def _whole(*, long: bool) -> Programme:
    """Return the standard programme, or the long one: more seeds, and HiGHS at a million lanes."""
    middle, capped, large = (10, 6, 3) if long else (5, 4, 2)
    return Programme(
        name="long" if long else "standard",
        minutes=240 if long else 60,
        cases=(
            Case(recipe=sized(10, 101), rivals=_rivals(10, long=long)),
            *(
                Case(recipe=sized(100, 101 + number), rivals=_rivals(100, long=long))
                for number in range(3)
            ),
            *(
                Case(
                    recipe=sized(1_000, 101 + number),
                    rivals=_rivals(1_000, long=long) if number < 2 else (),
                    forms=ALL_FORMS if number == 0 else (),
                    changes=CHANGES if number < 3 else CHANGES[:1],
                )
                for number in range(middle)
            ),
            *(
                Case(
                    recipe=sized(1_000, 111 + number, capped=30),
                    rivals=_rivals(1_000, long=long) if number == 0 else (),
                )
                for number in range(capped)
            ),
            *_hard(1_000, seed=121, repetitions=1, long=long),
            *(
                Case(
                    recipe=sized(10_000, 101 + number),
                    repetitions=1,
                    forms=("Parquet",) if number == 0 else (),
                    changes=CHANGES[:1],
                )
                for number in range(large)
            ),
        ),
        netgen=_NETGEN,
        serving=Serving(
            recipe=sized(1_000, 101),
            small=sized(10, 101),
            repetitions=5,
            small_repetitions=20,
        ),
    )


STANDARD: Final = _whole(long=False)
LONG: Final = _whole(long=True)
