"""Networks that are a little different from the one that was planned."""

import contextlib
from dataclasses import fields, replace
from random import Random
from typing import Any

import numpy as np

from service.network.canonical import NormalFormError, normal_form
from service.network.columns import Decimals, Network
from tests.evidence.zips import Document, Entries, network_of, repacked, with_network


def change_network(entries: Entries, rng: Random) -> bytes:
    """Plan as before, but for a network that is a little different; all digests follow."""
    network = network_of(entries)
    change = rng.choice([_other_number, _other_number, _without_rows, _without_rule, _other_thing])
    changed = change(network, rng)
    # A unit without meaning cannot be sorted by: then the rows stay as they are.
    with contextlib.suppress(NormalFormError):
        changed = normal_form(changed)
    return repacked(with_network(entries, changed))


def _other_number(network: Network, rng: Random) -> Network:
    """Return the network with one number of a table changed a little."""
    name = rng.choice(["supply", "demand", "lanes", "lanes"])
    table = getattr(network, name)
    columns = [
        field.name
        for field in fields(table)
        if isinstance(getattr(table, field.name), Decimals)
        and getattr(table, field.name).present.any()
    ]
    if not columns:
        return network
    field = rng.choice(columns)
    column: Decimals = getattr(table, field)
    row = int(rng.choice(np.flatnonzero(column.present).tolist()))
    values = column.values.copy()
    values[row] = max(0, int(values[row]) + rng.choice([-3, -1, 1, 2, 10, 10**9]))
    changed = replace(column, values=values)
    return replace(network, **{name: replace(table, **{field: changed})})


def _without_rows(network: Network, rng: Random) -> Network:
    """Return the network without one row of a table."""
    name = rng.choice(["supply", "demand", "lanes", "lanes"])
    table = getattr(network, name)
    if not len(table):
        return network
    gone = rng.randrange(len(table))
    keep = np.array([row for row in range(len(table)) if row != gone], dtype=np.int64)
    changed: dict[str, Any] = {}
    for field in fields(table):
        column = getattr(table, field.name)
        if isinstance(column, Decimals):
            changed[field.name] = replace(
                column, values=column.values[keep], present=column.present[keep]
            )
        elif hasattr(column, "codes"):
            changed[field.name] = replace(column, codes=column.codes[keep])
        else:
            changed[field.name] = column[keep]
    return replace(network, **{name: replace(table, **changed)})


def _without_rule(network: Network, rng: Random) -> Network:
    """Return the network with a rule less, or with one more."""
    rules: list[Document] = list(network.head["rules"])  # type: ignore[call-overload] # a list in every head
    if rules and rng.random() < 0.4:
        rules.pop(rng.randrange(len(rules)))
    else:
        site, item = rng.choice(network.sites).id, rng.choice(network.items).id
        rules.append(
            rng.choice(
                [
                    {"rule": "closure", "sites": {"ids": [site]}},
                    {"rule": "closure", "lanes": {"origin": [site]}, "items": {"ids": [item]}},
                    {"rule": "closure", "lanes": {}, "until": "2020-01-01"},
                    {"rule": "fixed_quantity", "lanes": {"origin": [site]}, "quantity": "1"},
                    {
                        "rule": "throughput",
                        "sites": {"ids": [site]},
                        "flow": rng.choice(["sent", "received", "through"]),
                        "maximum": "3",
                        "items": {"ids": [item]},
                    },
                    {"rule": "throughput", "sites": {}, "flow": "through", "maximum": "7"},
                ]
            )
            | {"id": "added"}
        )
    return replace(network, head={**network.head, "rules": rules})


def _other_thing(network: Network, rng: Random) -> Network:
    """Return the network with another item or site: step, weight, packs, roles or handling."""
    if rng.random() < 0.5:
        at = rng.randrange(len(network.items))
        item = network.items[at]
        changed = rng.choice(
            [
                replace(item, step=item.step * 2),
                replace(item, step=item.step / 2),
                replace(item, weight_kg=None),
                replace(item, packs=()),
                replace(item, unit="strange"),
            ]
        )
        return replace(network, items=(*network.items[:at], changed, *network.items[at + 1 :]))
    at = rng.randrange(len(network.sites))
    site = network.sites[at]
    other = rng.choice(
        [
            replace(site, roles=site.roles ^ {"cross_dock"} or frozenset({"ship_to"})),
            replace(site, handling_cost_any=None, handling_cost={}),
            replace(site, handling_cost_any=network.items[0].step, handling_cost={}),
        ]
    )
    return replace(network, sites=(*network.sites[:at], other, *network.sites[at + 1 :]))
