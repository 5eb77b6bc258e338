"""Recovering: at the start of a process that alone executes runs, nothing is running yet."""

from dataclasses import dataclass
from typing import Final

from service.runs.ports import Store
from service.runs.records import GivenBack
from service.runs.settle import put_back

_AT_ONCE: Final = 100


@dataclass(frozen=True, slots=True, kw_only=True)
class Recover:
    """Gives back what a process before this one was working on when it ended.

    Only for whoever holds the lock that makes it the only executor of this database: its claims
    cannot be alive. Nothing is counted as a crash, since a restart says nothing about a run.
    """

    store: Store

    def __call__(self) -> int:
        """Let every running run wait again; return how many."""
        recovered = 0
        while True:
            with self.store.transaction() as transaction:
                claims = transaction.held(expired_only=False, limit=_AT_ONCE)
                for claim in claims:
                    put_back(transaction, claim, GivenBack.RESTART)
            recovered += len(claims)
            if len(claims) < _AT_ONCE:
                return recovered
