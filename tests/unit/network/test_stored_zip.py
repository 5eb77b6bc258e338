"""Our few lines for zip files against the standard library's."""

import io
import zipfile

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.network.stored_zip import ZipFormError, read_stored_zip, stored_zip

NAMES = st.text("abc/.", min_size=1, max_size=8)


@given(st.dictionaries(NAMES, st.binary(max_size=50)))
def test_standard_library_writes_the_same_bytes(entries: dict[str, bytes]) -> None:
    """The form is that of the standard library with time stamp and mode set."""
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w", compression=zipfile.ZIP_STORED) as archive:
        for name in sorted(entries):
            entry = zipfile.ZipInfo(name, date_time=(1980, 1, 1, 0, 0, 0))
            entry.create_system = 3
            entry.external_attr = 0o100644 << 16
            archive.writestr(entry, entries[name])

    assert stored_zip(entries) == buffer.getvalue()
    assert read_stored_zip(stored_zip(entries)) == (entries, ())


@given(
    st.dictionaries(NAMES, st.binary(min_size=1, max_size=20), min_size=1, max_size=3),
    st.data(),
)
def test_no_byte_can_be_changed_unseen(entries: dict[str, bytes], data: st.DataObject) -> None:
    """Every byte of the file is either checked or part of an entry whose check sum then fails."""
    good = bytearray(stored_zip(entries))
    at = data.draw(st.integers(0, len(good) - 1))
    good[at] ^= data.draw(st.integers(1, 255))

    try:
        found, damaged = read_stored_zip(bytes(good))
    except ZipFormError:
        return
    assert damaged
    assert set(found) == set(entries)


@pytest.mark.parametrize("entries", [{"ü": b""}])
def test_names_are_ascii(entries: dict[str, bytes]) -> None:
    """Two spellings of one letter would be two names to some and one to others."""
    with pytest.raises(UnicodeEncodeError):
        stored_zip(entries)
