"""Names for runs and claims that nobody can guess and no two machines draw twice."""

import secrets
from datetime import datetime
from typing import Final

from service.runs.run import RunId, Token

# The extended hex alphabet (RFC 4648, section 7) keeps order: ids sort by time as plain text.
_ALPHABET: Final = "0123456789abcdefghijklmnopqrstuv"
_RANDOM_BITS: Final = 80


def new_run_id(moment: datetime) -> RunId:
    """Return ``run_`` and 26 characters: 48 bits of milliseconds, then 80 random bits."""
    number = int(moment.timestamp() * 1000) << _RANDOM_BITS | secrets.randbits(_RANDOM_BITS)
    return RunId("run_" + "".join(_ALPHABET[number >> shift & 31] for shift in range(125, -1, -5)))


def new_token() -> Token:
    """Return a fresh token of 128 random bits for one claim."""
    return Token(secrets.token_hex(16))
