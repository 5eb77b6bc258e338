"""Printed values of the standards that digests rest on: RFC 8785 and FIPS 180-4.

GS1 check digits, ISO 4217 decimals, RFC 3339 times and Recommendation 20 factors are checked where
the modules that read them are tested: ``tests/unit/network``.
"""

import pytest
import rfc8785
from hypothesis import given
from hypothesis import strategies as st

from service.network.canonical import canonical_json, digest
from service.network.canonical_json import NotCanonicalError

# RFC 8785, section 3.2.3: this object shows that keys sort by UTF-16 code units, where the emoji
# (a surrogate pair from D83D) comes before U+FB33. The values name the keys.
KEYS_OF_THE_RFC = {
    "\u20ac": "Euro Sign",
    "\r": "Carriage Return",
    "\ufb33": "Hebrew Letter Dalet With Dagesh",
    "1": "One",
    "\U0001f600": "Emoji: Grinning Face",
    "\u0080": "Control",
    "\u00f6": "Latin Small Letter O With Diaeresis",
}
ORDER_OF_THE_RFC = [
    "Carriage Return",
    "One",
    "Control",
    "Latin Small Letter O With Diaeresis",
    "Euro Sign",
    "Emoji: Grinning Face",
    "Hebrew Letter Dalet With Dagesh",
]
# RFC 8785, section 3.2.2: literals and a text with everything that must or must not be escaped.
VALUES_OF_THE_RFC = {
    "string": "\u20ac$\u000f\u000aA'\u0042\u0022\u005c\\\"/",
    "literals": [None, True, False],
}
BYTES_OF_THE_RFC = (
    '{"literals":[null,true,false],"string":"\u20ac$\\u000f\\nA\'B\\"\\\\\\\\\\"/"}'.encode()
)
# RFC 8785, appendix B, and the limit of section 3.2.2.3: beyond 2**53 doubles skip whole numbers.
LARGEST_WHOLE_NUMBER = 2**53 - 1

# FIPS 180-4 and its published examples: nothing, one block, two blocks, a million times "a".
SHA_256 = [
    (b"", "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855"),
    (b"abc", "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"),
    (
        b"abcdbcdecdefdefgefghfghighijhijkijkljklmklmnlmnomnopnopq",
        "248d6a61d20638b8e5c026930c3e6039a33ce45964ff2167f6ecedd419db06c1",
    ),
    (b"a" * 1_000_000, "cdc76e5c9914fb9281a1c7e284d73e67f1809a48a497200e046d39ccc7112cd0"),
]

values = st.recursive(
    st.none()
    | st.booleans()
    | st.integers(-LARGEST_WHOLE_NUMBER, LARGEST_WHOLE_NUMBER)
    | st.text(st.characters(exclude_categories=["Cs"])),
    lambda inner: (
        st.lists(inner, max_size=4)
        | st.dictionaries(st.text(st.characters(exclude_categories=["Cs"])), inner, max_size=4)
    ),
    max_leaves=12,
)


def test_keys_sort_as_in_the_example_of_rfc_8785() -> None:
    """Sorting by code points would put the emoji last."""
    written = canonical_json(KEYS_OF_THE_RFC).decode()

    assert sorted(ORDER_OF_THE_RFC, key=written.index) == ORDER_OF_THE_RFC


def test_values_are_written_as_in_the_example_of_rfc_8785() -> None:
    """No white space, the short escapes, lower-case hex, and a solidus as it is."""
    assert canonical_json(VALUES_OF_THE_RFC) == BYTES_OF_THE_RFC


@pytest.mark.parametrize("sign", [1, -1])
def test_whole_numbers_end_where_doubles_skip_some(sign: int) -> None:
    """What another reader would change is refused here; decimals travel as text."""
    assert canonical_json(sign * LARGEST_WHOLE_NUMBER) == str(sign * LARGEST_WHOLE_NUMBER).encode()
    with pytest.raises(NotCanonicalError):
        canonical_json(sign * (LARGEST_WHOLE_NUMBER + 1))


@given(value=values)
def test_canonical_json_is_that_of_an_independent_library(value: object) -> None:
    """PyPI rfc8785, by other authors, writes the same bytes for everything that we write."""
    assert canonical_json(value) == rfc8785.dumps(value)  # type: ignore[arg-type] # JSON by construction


@pytest.mark.parametrize(("content", "published"), SHA_256, ids=["none", "one", "two", "million"])
def test_digests_are_sha_256(content: bytes, published: str) -> None:
    """A digest names its function and is written in lower-case hex."""
    assert digest(content) == f"sha-256:{published}"
