"""What a shipment costs by a tariff: one exact function, and its steps where it rises evenly.

For a measure m above 0, rounded up first where the tariff says so: *incremental* is the integral of
the rate up to m; *all units* is the rate of the break that m reaches times m, with *pay up* the
least over all breaks of rate times max(m, break). At least the minimum charge is due; the surcharge
comes on top of both; money is rounded last, half away from zero. Nothing costs nothing.
"""

import math
from dataclasses import dataclass
from fractions import Fraction

from service.network.tariffs import Tariff


@dataclass(frozen=True, slots=True, kw_only=True)
class Part:
    """A part of a shipment at one rate, counted from a break on: ``quantity`` of the measure."""

    start: Fraction
    quantity: Fraction
    rate: Fraction


@dataclass(frozen=True, slots=True, kw_only=True)
class Freight:
    """What a shipment costs, in the currency of its tariff.

    ``measured`` is what the goods are, ``charged`` what is paid for; ``base`` what the ``parts``
    come to; ``amount`` what is due after minimum, surcharge and rounding.
    """

    measured: Fraction
    charged: Fraction
    parts: tuple[Part, ...]
    base: Fraction
    amount: Fraction


@dataclass(frozen=True, slots=True)
class Run:
    """Steps that each cost the same more than the one before: ``width`` of them, None for ever."""

    width: int | None
    money: Fraction


def freight(tariff: Tariff, measured: Fraction) -> Freight:
    """Return what a shipment of ``measured`` (0 or more) of the tariff's measure costs."""
    if measured == 0:
        zero = Fraction(0)
        return Freight(measured=zero, charged=zero, parts=(), base=zero, amount=zero)
    reached = _up(measured, tariff.round_up_to)
    parts = _of_all_units(tariff, reached) if tariff.all_units else _by_break(tariff, reached)
    base = sum((part.quantity * part.rate for part in parts), Fraction(0))
    due = max(base, tariff.minimum_charge) * (1 + tariff.surcharge_percent / 100)
    return Freight(
        measured=measured,
        charged=sum((part.quantity for part in parts), Fraction(0)),
        parts=parts,
        base=base,
        amount=due if tariff.round_money is None else _nearest(due, tariff.round_money),
    )


def rising_runs(tariff: Tariff, of_step: Fraction) -> tuple[Run, ...] | None:
    """Return what each further step of one item costs, None where it ever costs less again.

    ``of_step`` is how much of the measure a step is. The runs start with nothing shipped, and no
    two of them that follow each other cost the same; None also where a rounding matters, since what
    is rounded up and down rises unevenly.
    """
    if of_step == 0:
        return (Run(None, Fraction(0)),)
    if tariff.round_up_to is not None and (of_step / tariff.round_up_to).denominator != 1:
        return None
    counts = _turning_counts(tariff, of_step)
    costs = [_unrounded(tariff, count * of_step) for count in counts]
    runs: list[Run] = []
    for at in range(len(counts) - 1):
        width = counts[at + 1] - counts[at]
        money = (costs[at + 1] - costs[at]) / width
        if runs and money < runs[-1].money:
            return None
        if tariff.round_money is not None and (money / tariff.round_money).denominator != 1:
            return None
        if runs and money == runs[-1].money:
            width += runs.pop().width or 0
        runs.append(Run(width, money))
    return (*runs[:-1], Run(None, runs[-1].money))


def is_even(tariff: Tariff) -> bool:
    """Return whether each unit of the measure costs the same, however much is shipped."""
    rates = {one.rate for one in tariff.breaks}
    bent = tariff.minimum_charge or tariff.round_up_to is not None or tariff.round_money is not None
    return len(rates) == 1 and not bent


def _turning_counts(tariff: Tariff, of_step: Fraction) -> list[int]:
    """Return numbers of steps between which the cost rises evenly, from 0, the last two so too.

    The cost is straight but where a break, a minimum or a cheaper break turns it, and each of these
    lies between two whole numbers that are here.
    """
    turns = {one.start for one in tariff.breaks}
    held = Fraction(0)
    for at, one in enumerate(tariff.breaks):
        if at:
            held += tariff.breaks[at - 1].rate * (one.start - tariff.breaks[at - 1].start)
        if not one.rate:
            continue
        turns.add(tariff.minimum_charge / one.rate)
        turns.add(one.start + (tariff.minimum_charge - held) / one.rate)
        if tariff.pay_up:
            turns |= {other.rate * other.start / one.rate for other in tariff.breaks}
    counts = {0, 1}
    for turn in turns:
        if turn > 0:
            before = math.floor(turn / of_step)
            counts |= {before, before + 1, before + 2}
    last = max(counts)
    return sorted(counts | {last + 1})


def _unrounded(tariff: Tariff, measured: Fraction) -> Fraction:
    """Return what is due before any rounding of quantity or money."""
    if measured == 0:
        return Fraction(0)
    parts = _of_all_units(tariff, measured) if tariff.all_units else _by_break(tariff, measured)
    base = sum((part.quantity * part.rate for part in parts), Fraction(0))
    return max(base, tariff.minimum_charge) * (1 + tariff.surcharge_percent / 100)


def _by_break(tariff: Tariff, measured: Fraction) -> tuple[Part, ...]:
    """Return what lies between each two breaks, at its own rate."""
    ends = [one.start for one in tariff.breaks[1:]] + [measured]
    return tuple(
        Part(start=one.start, quantity=min(end, measured) - one.start, rate=one.rate)
        for one, end in zip(tariff.breaks, ends, strict=True)
        if one.start < measured
    )


def _of_all_units(tariff: Tariff, measured: Fraction) -> tuple[Part, ...]:
    """Return all of it at the rate of one break: that which it reaches, or a cheaper one later."""
    reached = [one for one in tariff.breaks if one.start <= measured][-1]
    best = Part(start=reached.start, quantity=measured, rate=reached.rate)
    for one in tariff.breaks if tariff.pay_up else ():
        quantity = max(measured, one.start)
        if quantity * one.rate < best.quantity * best.rate:
            best = Part(start=one.start, quantity=quantity, rate=one.rate)
    return (best,)


def _up(amount: Fraction, grid: Fraction | None) -> Fraction:
    """Return the least multiple of ``grid`` that is not below ``amount``."""
    return amount if grid is None else math.ceil(amount / grid) * grid


def _nearest(amount: Fraction, grid: Fraction) -> Fraction:
    """Return the nearest multiple of ``grid``, of two as near the greater one; ``amount`` >= 0."""
    return math.floor(amount / grid + Fraction(1, 2)) * grid
