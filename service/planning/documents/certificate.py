"""The certificate: flow, prices and achievements that let anybody prove the plan again."""

import platform
from fractions import Fraction
from functools import cache
from importlib.metadata import version

from service.planning.documents.amounts import Document, text
from service.planning.documents.coupled_proof import (
    contradiction_proof,
    coupled_proof,
    coupled_steps,
)
from service.planning.documents.item_proof import item_proof, named_nodes
from service.planning.documents.priorities import Achieved, money_of
from service.planning.model.arcs import ROOT
from service.planning.model.compile import Compiled
from service.planning.solution import Solution, Why

FORMAT = 1


@cache
def versions() -> dict[str, str]:
    """Return the versions that a plan is a function of, besides network and options."""
    return {
        "lanewright": version("lanewright"),
        "ortools": version("ortools"),
        "numpy": version("numpy"),
        "scipy": version("scipy"),
        "python": platform.python_version(),
    }


def proved_certificate(  # noqa: PLR0913 - the parts of one document
    compiled: Compiled,
    solution: Solution,
    achieved: list[Achieved],
    *,
    total_cost: Fraction,
    network_digest: str,
    options_digest: str,
) -> Document:
    """Return the certificate of a plan: every step with what it achieves, and its bound.

    They are equal but where items share limits.
    """
    network, scale = compiled.network, compiled.cost_scale
    steps: list[Document] = []
    for flow, result in zip(solution.flows, achieved, strict=True):
        if flow.reduced is not None:
            continue
        item = network.items[flow.own.item]
        for priority, short in result.short:
            quantity = text(short * item.step)
            steps.append(
                {
                    "item": item.id,
                    "of": "shortage",
                    "priority": priority,
                    "achieved": quantity,
                    "bound": quantity,
                }
            )
        if result.late is not None:
            late = text(result.late * item.step)
            steps.append({"item": item.id, "of": "lateness", "achieved": late, "bound": late})
        money = text(money_of(result.money, compiled.cost_scale))
        steps.append({"item": item.id, "of": "cost", "achieved": money, "bound": money})
    for made in solution.coupled:
        steps += coupled_steps(network, made, scale)
    document = {
        **_head(compiled, network_digest=network_digest, options_digest=options_digest),
        "cost_scale": text(scale),
        "total_cost": text(total_cost),
        "lower_bound": text(total_cost - solution.gap(scale)),
        "gap": text(solution.gap(scale)),
        "lexicographic": "proved" if solution.proved else "best_found",
        "versions": versions(),
        "steps": steps,
        "items": [item_proof(network, flow) for flow in solution.flows],
    }
    if solution.coupled:
        document["coupled"] = [
            coupled_proof(network, made, compiled.items, scale) for made in solution.coupled
        ]
    return document


def contradiction_certificate(
    compiled: Compiled,
    why: Why,
    *,
    network_digest: str,
    options_digest: str,
) -> Document:
    """Return the certificate of a network without a plan.

    For an item a set of nodes that no flow satisfies; for items that share limits their prices.
    """
    network = compiled.network
    document = {
        **_head(compiled, network_digest=network_digest, options_digest=options_digest),
        "cost_scale": None,
        "total_cost": None,
        "lower_bound": None,
        "gap": None,
        "lexicographic": "no_plan",
        "versions": versions(),
        "cuts": [
            {
                "item": network.items[own.item].id,
                "nodes": [name for node, name in named_nodes(network, own) if cut.places[node]],
                "root": bool(cut.places[ROOT]),
                "forced_out": text(cut.forced_out * network.items[own.item].step),
                "can_enter": text(cut.can_enter * network.items[own.item].step),
            }
            for own, cut in why.cuts
        ],
    }
    if why.contradictions:
        document["contradictions"] = [
            contradiction_proof(network, found, compiled.items) for found in why.contradictions
        ]
    return document


def _head(compiled: Compiled, *, network_digest: str, options_digest: str) -> Document:
    """Return the fields that every certificate begins with."""
    return {
        "format": FORMAT,
        "method": compiled.method,
        "network_digest": network_digest,
        "options_digest": options_digest,
        "currency": compiled.network.head["currency"],
    }
