"""Canonical JSON against the published oracle and the rules of RFC 8785."""

import hashlib
import json
from typing import Any

import pytest
import rfc8785
from hypothesis import given
from hypothesis import strategies as st

from service.network.canonical import canonical_json, digest
from service.network.canonical_json import NotCanonicalError
from service.network.strict_json import StrictJsonError, nesting, strict_json

TEXT = st.text(st.characters(exclude_categories=["Cs"]))
VALUES = st.recursive(
    st.none() | st.booleans() | st.integers(-(2**53) + 1, 2**53 - 1) | TEXT,
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(TEXT, inner, max_size=4),
    max_leaves=20,
)


@given(VALUES)
def test_bytes_are_those_of_the_published_package(value: Any) -> None:  # noqa: ANN401 - any JSON
    """An independent implementation of RFC 8785 is the oracle."""
    assert canonical_json(value) == rfc8785.dumps(value)


def test_keys_are_sorted_as_the_standard_sorts_its_example() -> None:
    """RFC 8785, section 3.2.3: by UTF-16 code units, so that a surrogate pair precedes U+FB33."""
    example = {
        "\u20ac": "Euro Sign",
        "\r": "Carriage Return",
        "\ufb33": "Hebrew Letter Dalet With Dagesh",
        "1": "One",
        "\U0001f600": "Emoji: Grinning Face",
        "\u0080": "Control",
        "\u00f6": "Latin Small Letter O With Diaeresis",
    }

    keys = list(json.loads(canonical_json(example)))

    assert keys == ["\r", "1", "\u0080", "\u00f6", "\u20ac", "\U0001f600", "\ufb33"]


def test_text_is_escaped_as_the_standard_escapes_its_example() -> None:
    """RFC 8785, section 3.2.2: the string of its sample, with the bytes that it must have."""
    value = '\u20ac$\u000f\nA\'B"\\\\"/'

    assert (
        canonical_json([value]) == rb'["' + "€$".encode() + rb"\u000f\nA" + b"'" + rb'B\"\\\\\"/"]'
    )


@pytest.mark.parametrize(
    ("message", "expected"),
    [
        # FIPS 180-4 example computations, as NIST publishes them for SHA-256.
        (b"abc", "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"),
        (
            b"abcdbcdecdefdefgefghfghighijhijkijkljklmklmnlmnomnopnopq",
            "248d6a61d20638b8e5c026930c3e6039a33ce45964ff2167f6ecedd419db06c1",
        ),
        # NIST CAVP, SHA256ShortMsg, Len = 0.
        (b"", "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855"),
    ],
)
def test_digest_is_sha_256_as_nist_prints_it(message: bytes, expected: str) -> None:
    """The digest is the plain standard one, with its name in front."""
    assert digest(message) == f"sha-256:{expected}"
    assert digest(message) == f"sha-256:{hashlib.sha256(message).hexdigest()}"


@pytest.mark.parametrize("value", [1.5, 2**53, -(2**53), {1: "a"}, "\ud800", {"\udfff": 1}, b"x"])
def test_what_has_no_exact_form_is_refused(value: object) -> None:
    """A float would lose what is proved; half a pair has no UTF-8."""
    with pytest.raises(NotCanonicalError):
        canonical_json(value)


def test_endless_nesting_is_refused_not_a_crash() -> None:
    """The writer recurses; what is too deep for it ends in its own error."""
    deep: list[Any] = []
    for _ in range(100_000):
        deep = [deep]

    with pytest.raises(NotCanonicalError):
        canonical_json(deep)


@pytest.mark.parametrize(
    "data",
    [
        b'{"a":1,"a":2}',
        b"[" * 33 + b"]" * 33,
        b"1" * 19,
        b"NaN",
        b"-Infinity",
        b'"\\udc00"',
        b"\xff",
        b"",
        b"[1,]",
    ],
)
def test_strict_reading_refuses_what_readers_could_take_differently(data: bytes) -> None:
    """Doubled keys, deep nesting, endless numbers, half pairs: no document of ours has them."""
    with pytest.raises(StrictJsonError):
        strict_json(data)


@given(VALUES)
def test_strict_reading_gives_back_what_was_written(value: Any) -> None:  # noqa: ANN401 - any JSON
    """Reading and writing are inverse for whatever is not too deep."""
    data = canonical_json(value)
    if nesting(data) <= 32 and not any(len(part) > 18 for part in _numbers(value)):
        assert strict_json(data) == value


def test_nesting_counts_brackets_outside_texts_only() -> None:
    """Brackets and quotes inside texts are letters."""
    assert nesting(b'{"[[[": ["\\"[", [1]]}') == 3


def _numbers(value: object) -> list[str]:
    """Return the texts of all whole numbers in a value."""
    if isinstance(value, dict):
        return [text for member in value.values() for text in _numbers(member)]
    if isinstance(value, list):
        return [text for element in value for text in _numbers(element)]
    return [str(value)] if isinstance(value, int) else []
