"""Whatever bytes stand where a table should: faults or a network, never a traceback."""

import io
import zipfile

from hypothesis import given
from hypothesis import strategies as st

from service.network.faults import Status
from service.network.files.media_types import XLSX
from service.network.files.table_columns import TABLES as COLUMNS
from tests.files.odd_networks import AWKWARD
from tests.files.reading import TABLES, files, read
from tests.files.test_workbook import workbook
from tests.files.writing import with_part, zipped

tables = st.sampled_from(sorted(TABLES))
names = st.sampled_from(sorted({name for columns in COLUMNS.values() for name in columns}))
cells = st.sampled_from([*AWKWARD, "", "1", "1,5", "1.5", "NORTH", "YARD", "0025", "ship_to"])
BOOK = workbook()
with zipfile.ZipFile(io.BytesIO(BOOK)) as archive:
    PARTS = {name: archive.read(name) for name in archive.namelist()}


def assert_answered(body: bytes, media_type: str | None = None) -> None:
    """Assert that a body is accepted, or refused with faults that have a place and advice."""
    report = read(body) if media_type is None else read(body, media_type)

    if report.status != Status.ACCEPTED:
        assert report.faults
        assert report.fault_count >= len(report.faults)
        assert all(fault.code and fault.detail for fault in report.faults)


@given(name=tables, content=st.binary(max_size=200), dialect=st.none() | st.binary(max_size=40))
def test_any_bytes_as_csv(name: str, content: bytes, dialect: bytes | None) -> None:
    """Letters of no alphabet, separators of no program."""
    assert_answered(zipped(files(**{name: content, "dialect": dialect})))


@given(
    name=tables,
    header=st.lists(names | cells, max_size=6),
    rows=st.lists(st.lists(cells, max_size=7), max_size=4),
    mark=st.sampled_from(",;\t"),
)
def test_any_cells_as_csv(name: str, header: list[str], rows: list[list[str]], mark: str) -> None:
    """Columns of other tables, cells of other columns, rows of any length."""
    text = "\n".join(mark.join(row) for row in (header, *rows))

    assert_answered(zipped(files(**{name: text})))


@given(
    part=st.sampled_from(sorted(PARTS)),
    start=st.integers(0, 3000),
    length=st.integers(0, 40),
    content=st.binary(max_size=40),
)
def test_any_bytes_in_a_workbook(part: str, start: int, length: int, content: bytes) -> None:
    """A few bytes of one of its parts are others."""
    whole = PARTS[part]
    start %= len(whole)

    assert_answered(with_part(BOOK, part, whole[:start] + content + whole[start + length :]), XLSX)


@given(start=st.integers(0, 5000), length=st.integers(0, 40), content=st.binary(max_size=40))
def test_any_bytes_in_a_zip(start: int, length: int, content: bytes) -> None:
    """Directory, headers and packed contents alike."""
    whole = zipped(files())
    start %= len(whole)

    assert_answered(whole[:start] + content + whole[start + length :])
