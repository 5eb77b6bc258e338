"""What plan and certificate repeat of the network they are about."""

from collections.abc import Mapping, Sequence
from typing import Any

from service.network.columns import Network
from service.network.rules import rules_of
from service.proof.rulings import Rulings
from service.proof.violations import Findings


def check_heads(
    network: Network,
    plan: Mapping[str, Any],
    certificate: Mapping[str, Any],
    *,
    digests: tuple[str, str],
    findings: Findings,
) -> None:
    """Note digests (of network and options) and head fields that are not those of the network."""
    stated = (
        ("/network_digest", plan["network_digest"], digests[0]),
        ("/options_digest", plan["options_digest"], digests[1]),
        ("/certificate/network_digest", plan["certificate"]["network_digest"], digests[0]),
        ("certificate/network_digest", certificate["network_digest"], digests[0]),
        ("certificate/options_digest", certificate["options_digest"], digests[1]),
    )
    for place, value, digest in stated:
        if value != digest:
            findings.add("digest_mismatch", f"it is {digest}", place=place)
    for field in ("name", "currency", "cut_off", "release_by"):
        if plan[field] != network.head.get(field):
            findings.add("plan_head", "it is not that of the network", place=f"/{field}")
    if certificate["currency"] != network.head.get("currency"):
        findings.add("plan_head", "it is not that of the network", place="certificate/currency")


def check_rules_listed(
    network: Network,
    rulings: Rulings,
    listed: Sequence[Mapping[str, Any]],
    findings: Findings,
) -> None:
    """Note when the rules on the plan are not those of the network, applied on their days."""
    applied = {ruling.rule.id for ruling in rulings.rulings}
    expected = [
        (rule.name, rule.id, rule.note, rule.owner, rule.id in applied)
        for rule in rules_of(network)
    ]
    fields = ("rule", "id", "note", "owner", "applied")
    if [tuple(rule[field] for field in fields) for rule in listed] != expected:
        findings.add("rules_wrong", "not the rules of the network", place="/rules_in_force")
