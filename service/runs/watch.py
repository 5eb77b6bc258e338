"""Watching: one query for all claims of a process, which renews them and tells which are gone."""

from collections.abc import Collection, Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Final

from service.runs.ports import Store
from service.runs.run import Progress, Token

_NOTHING_TOLD: Final[Mapping[Token, Progress]] = MappingProxyType({})


@dataclass(frozen=True, slots=True, kw_only=True)
class Watch:
    """Renews the leases of a process; to be called every half second or so."""

    store: Store
    lease_seconds: float

    def __call__(
        self, tokens: Collection[Token], progress: Mapping[Token, Progress] = _NOTHING_TOLD
    ) -> frozenset[Token]:
        """Return those of ``tokens`` that no longer hold a run: end their children.

        ``progress`` is noted with the same write, for whoever asks how far a run is.
        Raises ``StoreUnavailable`` when the database is away; the leases run on meanwhile.
        """
        if not tokens:
            return frozenset()
        with self.store.transaction() as transaction:
            held = transaction.renew(tokens, lease_seconds=self.lease_seconds, progress=progress)
        return frozenset(tokens) - held
