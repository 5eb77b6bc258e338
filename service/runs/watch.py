"""Watching: one query for all claims of a process, which renews them and tells which are gone."""

from collections.abc import Collection
from dataclasses import dataclass

from service.runs.ports import Store
from service.runs.run import Token


@dataclass(frozen=True, slots=True, kw_only=True)
class Watch:
    """Renews the leases of a process; to be called every half second or so."""

    store: Store
    lease_seconds: float

    def __call__(self, tokens: Collection[Token]) -> frozenset[Token]:
        """Return those of ``tokens`` that no longer hold a run: end their children.

        Raises ``StoreUnavailable`` when the database is away; the leases run on meanwhile.
        """
        if not tokens:
            return frozenset()
        with self.store.transaction() as store:
            return frozenset(tokens) - store.renew(tokens, lease_seconds=self.lease_seconds)
