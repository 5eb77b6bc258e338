"""Items that share limits as the certificate states them: prices of limits and of places."""

from collections.abc import Sequence
from fractions import Fraction

import numpy as np

from service.network.columns import Network
from service.network.naming import lane_names
from service.planning.coupled.certified_bound import CertifiedBound
from service.planning.coupled.contradiction import Contradiction
from service.planning.coupled.items import CoupledPlan, CoupledStep
from service.planning.documents.amounts import Document, text
from service.planning.documents.item_proof import named_nodes
from service.planning.model.arcs import MoneyArray
from service.planning.model.item_network import ItemNetwork
from service.planning.model.shared_limits import LimitName, SharedLimits


def coupled_steps(network: Network, made: CoupledPlan, scale: Fraction) -> list[Document]:
    """Return what each step of a circle achieved, and its bound."""
    items = [network.items[item].id for item in made.items]
    steps: list[Document] = []
    for step in made.steps:
        unit = _unit(made, step, scale)
        achieved = {"achieved": text(step.achieved * unit), "bound": text(step.bound * unit)}
        if step.priority is None:
            steps.append({"items": items, "of": "cost", **achieved})
        else:
            measure = made.grid.measure
            steps.append(
                {
                    "items": items,
                    "of": "shortage",
                    "priority": step.priority,
                    "measure": measure,
                    **achieved,
                }
            )
    return steps


def coupled_proof(
    network: Network, made: CoupledPlan, items: Sequence[ItemNetwork], scale: Fraction
) -> Document:
    """Return the proofs of the steps of a circle; ``items`` are all of the run."""
    own = [items[item] for item in made.items]
    return {
        "items": [network.items[item].id for item in made.items],
        "proofs": [
            None
            if step.proof is None
            else _proof(network, made, step, step.proof, own, _unit(made, step, scale))
            for step in made.steps
        ],
    }


def _unit(made: CoupledPlan, step: CoupledStep, scale: Fraction) -> Fraction:
    """Return what one whole number of a step's objective stands for."""
    return 1 / scale if step.priority is None else made.grid.grain


def _proof(  # noqa: PLR0913, PLR0917 - the parts of one document
    network: Network,
    made: CoupledPlan,
    step: CoupledStep,
    proof: CertifiedBound,
    items: Sequence[ItemNetwork],
    unit: Fraction,
) -> Document:
    """Return the proof of one step: prices in whole numbers of which ``scale`` make one."""
    scale = proof.fineness / unit
    return {
        "scale": text(scale),
        "multipliers": [
            {**name, "value": text(number / (scale * made.limits.grain[row]))}
            for row, number, name in named_limits(network, made.limits, proof.multiplier)
        ],
        "caps": [
            {"priority": former.priority, "value": text(number / (scale * made.grid.grain))}
            for former, number in zip(made.steps, step.caps, strict=False)
            if number
        ],
        "prices": [
            {"item": network.items[own.item].id, "nodes": _nodes(network, own, price)}
            for own, price in zip(items, proof.prices, strict=True)
        ],
    }


def contradiction_proof(
    network: Network, found: Contradiction, items: Sequence[ItemNetwork]
) -> Document:
    """Return the proof that limits contradict each other; null where only whole steps do."""
    own, proof = [items[item] for item in found.items], found.proof
    return {
        "items": [network.items[item].id for item in found.items],
        "proof": None
        if proof is None
        else {
            "scale": str(proof.fineness),
            "multipliers": [
                {
                    **name,
                    "value": text(number / (proof.fineness * found.limits.grain[row])),
                }
                for row, number, name in named_limits(network, found.limits, proof.multiplier)
            ],
            "caps": [],
            "prices": [
                {"item": network.items[each.item].id, "nodes": _nodes(network, each, price)}
                for each, price in zip(own, proof.prices, strict=True)
            ],
        },
    }


def named_limits(
    network: Network, limits: SharedLimits, multiplier: Sequence[int]
) -> list[tuple[int, int, Document]]:
    """Return (row, number, what the row is called) of every number that is not 0."""
    used = [(row, number) for row, number in enumerate(multiplier) if number]
    lanes = [limits.names[row].lane for row, _ in used]
    rows = np.array([lane for lane in lanes if lane is not None], np.int64)
    names = iter(lane_names(network, rows))
    return [
        (row, number, _name(network, limits.names[row], None if lane is None else next(names)))
        for (row, number), lane in zip(used, lanes, strict=True)
    ]


def _name(network: Network, name: LimitName, lane: str | None) -> Document:
    """Return what a limit is called."""
    site = None if name.site is None else network.sites[name.site].id
    return {"rule": name.rule, "site": site, "lane": lane}


def _nodes(network: Network, own: ItemNetwork, price: MoneyArray) -> list[Document]:
    """Return the nodes with a price that is not 0."""
    amounts = price.tolist()
    return [
        {**name, "price": str(int(amounts[node]))}
        for node, name in named_nodes(network, own)
        if amounts[node]
    ]
