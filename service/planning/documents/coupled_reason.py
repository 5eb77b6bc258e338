"""Limits that contradict each other, in words."""

import numpy as np

from service.network.naming import lane_names
from service.planning.coupled.contradiction import Contradiction
from service.planning.documents.amounts import Document, text
from service.planning.model.compile import Compiled
from service.planning.model.shared_limits import NO_LEAST, NO_MOST, SharedLimits

NAMES_MAX = 3


def coupled_reason(compiled: Compiled, found: Contradiction) -> Document:
    """Return the contradiction of items that share limits."""
    network, limits = compiled.network, found.limits
    names = [network.items[item].id for item in found.items]
    rows = found.rows.tolist()
    said = [_limit(compiled, limits, row) for row in rows]
    forced = []
    for at, arc in found.forced:
        own = compiled.items[found.items[at]]
        thing = network.items[own.item]
        name = lane_names(network, own.lanes.rows[np.array([arc])])[0]
        least = text(int(own.arcs.minimum[arc]) * thing.step)
        forced.append(f"lane {name} must take {least} {thing.unit} of {thing.id}")
    served = "" if compiled.options.shortages == "allow" else ", and everything ordered is served"
    if found.proof is None:
        detail = (
            f"{listed(names)}: goods that can be divided would have a plan; in whole steps none "
            f"was found with {listed(said)}{served}."
        )
    else:
        detail = (
            f"{listed(names)}: with the stock and lanes there are, these contradict each other, "
            f"and none is too many: {listed([*said, *forced])}{served}."
        )
    return {
        "items": names,
        "rules": sorted({rule for row in rows if (rule := limits.names[row].rule) is not None}),
        "limits": said,
        "forced": forced,
        "whole_steps": found.proof is None,
        "detail": detail,
    }


def _limit(compiled: Compiled, limits: SharedLimits, row: int) -> str:
    """Return what a limit says, in words."""
    name, network = limits.names[row], compiled.network
    who = f"rule {name.rule}" if name.rule is not None else ""
    if name.site is not None:
        who += f" at {network.sites[name.site].id}"
    if name.lane is not None:
        lane = lane_names(network, np.array([name.lane]))[0]
        who = f"{who} on lane {lane}" if who else f"lane {lane} for all items together"
    said = []
    if limits.lower[row] != NO_LEAST:
        said.append(f"at least {text(int(limits.lower[row]) * limits.grain[row])}")
    if limits.upper[row] != NO_MOST:
        said.append(f"at most {text(int(limits.upper[row]) * limits.grain[row])}")
    return f"{who} ({' and '.join(said)} {limits.measures[row]})"


def listed(names: list[str]) -> str:
    """Return names as a list in a sentence, the rest of a long one as a number."""
    if len(names) > NAMES_MAX + 1:
        names = [*names[:NAMES_MAX], f"{len(names) - NAMES_MAX} more"]
    if len(names) <= 1:
        return "".join(names)
    return ", ".join(names[:-1]) + " and " + names[-1]
