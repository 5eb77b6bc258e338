"""JSON read without loss, and every flaw of a text with its place."""

import json

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.network.files.json import Number, nesting, read_json

JSON_VALUES = st.recursive(
    st.none() | st.booleans() | st.integers() | st.text(),
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(st.text(), inner, max_size=4),
    max_leaves=20,
)


def read(text: bytes) -> object:
    """Return the value of a sound text."""
    result = read_json(text, nesting_max=16)
    assert result.unreadable == ()
    assert result.invalid == ()
    return result.value


def flaw(text: bytes) -> tuple[str, str]:
    """Return code and sentence of the fault that makes a text unreadable."""
    (fault,) = read_json(text, nesting_max=16).unreadable
    assert fault.pointer == ""
    return fault.code, fault.detail


def test_numbers_keep_their_digits_and_text_stays_text() -> None:
    """0.29999999999999998 is another rate than 0.3, and 1.50 was written with two decimals."""
    value = read(b'{"rate": 0.29999999999999998, "exact": 1.50, "text": "1.50"}')

    assert value == {"rate": "0.29999999999999998", "exact": "1.50", "text": "1.50"}
    assert isinstance(value, dict)
    assert type(value["exact"]) is Number
    assert type(value["text"]) is str


def test_a_number_of_any_length_is_read_as_its_digits() -> None:
    """Python refuses to convert 4,301 digits; nobody converts here."""
    assert read(b"9" * 100_000) == "9" * 100_000


@pytest.mark.parametrize(
    ("text", "code", "place"),
    [
        (b"", "not_json", "line 1, column 1"),
        (b"[1]\n x", "not_json", "line 2, column 2"),
        (b'{"a": 1,}', "not_json", "column 9"),
        (b'{"a": 1', "not_json", "column 8"),
        (b'["a\tb"]', "not_json", "column 4"),
        (b"[01]", "not_json", "column 3"),
        (b'["NaN", NaN]', "not_json", "line 1, column 9"),
        (b'["\\"Infinity",\n-Infinity]', "not_json", "line 2, column 1"),
        (b'["\xff"]', "not_utf8", "byte 3"),
        (b'["\xed\xa0\x80"]', "not_utf8", "byte 3"),
        (b"[" * 17 + b"]" * 17, "nested_too_deeply", "17 deep"),
        (b"[" * 1_000_000, "nested_too_deeply", "1000000 deep"),
        (b'{"a":' * 1000, "nested_too_deeply", "1000 deep"),
    ],
)
def test_an_unreadable_text_says_where_it_breaks(text: bytes, code: str, place: str) -> None:
    """Whoever wrote the exporting program must find the spot."""
    found_code, detail = flaw(text)

    assert found_code == code
    assert place in detail


def test_sixteen_levels_are_read() -> None:
    """The limit itself is allowed."""
    assert nesting(b"[" * 16 + b"]" * 16) == 16
    read(b"[" * 16 + b"]" * 16)


@given(JSON_VALUES)
def test_nesting_is_what_a_walk_through_the_value_finds(value: object) -> None:
    """Brackets inside strings, also escaped ones, count for nothing."""

    def depth(part: object) -> int:
        if isinstance(part, dict):
            return 1 + max(map(depth, part.values()), default=0)
        if isinstance(part, list):
            return 1 + max(map(depth, part), default=0)
        return 0

    assert nesting(json.dumps(value).encode()) == depth(value)
    assert nesting(json.dumps(value, ensure_ascii=False).encode("utf-8", "replace")) == depth(value)


def test_a_byte_order_mark_is_passed_over() -> None:
    """RFC 8259, section 8.1 allows a reader to ignore it; spreadsheets write it."""
    assert read(b"\xef\xbb\xbf[1]") == ["1"]


def test_repeated_names_are_faults_where_they_stand() -> None:
    """RFC 8259, section 4: what they mean is unpredictable. A lane could lose its capacity."""
    text = b'{"a": [{"b/c": 1, "d": 2, "b/c": 3}], "e": {"f": 1}, "e": 2}'

    result = read_json(text, nesting_max=16)

    assert [(fault.pointer, fault.code) for fault in result.invalid] == [
        ("/e", "duplicate_name"),
        ("/a/0/b~1c", "duplicate_name"),
    ]


@pytest.mark.parametrize(
    ("text", "place"),
    [
        (b'{"a": ["\\ud800"]}', "/a/0"),
        (b'{"a": ["\\uDC00x"]}', "/a/0"),
        (b'{"\\ud800": 1}', "/?"),
    ],
)
def test_half_of_a_surrogate_pair_is_no_text(text: bytes, place: str) -> None:
    """It has no UTF-8 form, so it could be stored nowhere."""
    (fault,) = read_json(text, nesting_max=16).invalid

    assert (fault.pointer, fault.code) == (place, "not_text")


def test_whole_surrogate_pairs_are_characters() -> None:
    """An escaped character beyond the first 65,536 is as good as a plain one."""
    assert read(b'["\\ud83d\\ude9b"]') == ["\U0001f69b"]


@given(JSON_VALUES)
def test_values_are_those_of_the_standard_library(value: object) -> None:
    """But for numbers, which are digits here, both readers agree."""

    def digits(part: object) -> object:
        if isinstance(part, dict):
            return {name: digits(element) for name, element in part.items()}
        if isinstance(part, list):
            return [digits(element) for element in part]
        if isinstance(part, bool) or not isinstance(part, int):
            return part
        return str(part)

    result = read_json(json.dumps(value).encode(), nesting_max=64)

    assert result.unreadable == ()
    assert result.invalid == ()
    assert result.value == digits(value)


@given(st.binary(max_size=60))
def test_no_bytes_make_the_reader_fall_over(data: bytes) -> None:
    """Every text is a value or a fault."""
    result = read_json(data, nesting_max=16)

    assert len(result.unreadable) <= 1
