"""What single values of a stored network must be: shared by all that check its normal form."""

from fractions import Fraction

from service.network.column_bytes import NormalFormError
from service.network.moments import read_date
from service.network.quantities import exact_text, parse_exact


def must(holds: bool, detail: str) -> None:  # noqa: FBT001 - reads like an assertion
    """Raise ``NormalFormError`` with ``detail`` unless ``holds``."""
    if not holds:
        raise NormalFormError(detail)


def is_date(value: object) -> bool:
    """Return whether ``value`` is the text of a calendar date, as ISO 8601 writes it."""
    try:
        return isinstance(value, str) and read_date(value).isoformat() == value
    except ValueError:
        return False


def decimal_of(text: object) -> Fraction:
    """Return the value of a decimal in its one spelling; raises ``NormalFormError``.

    A fraction is no decimal, although it is exact: where it may stand, another reader is asked.
    """
    try:
        value = parse_exact(text) if isinstance(text, str) and "/" not in text else None
    except ValueError:
        value = None
    if value is None or exact_text(value) != text:
        raise NormalFormError("not a decimal in normal form")
    return value
