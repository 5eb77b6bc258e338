"""Workbooks of strangers: nothing hides from the guard that judges them before they are read."""

import io
import re
import zipfile

import openpyxl
import pytest

from service.network.faults import Status
from service.network.files import workbook_guard
from service.network.files.media_types import XLSX, ZIP
from tests.files.reading import files, places, read, refused
from tests.files.test_workbook import workbook
from tests.files.writing import with_part, zipped


def test_a_cell_far_away_does_not_make_a_huge_sheet() -> None:
    """A rectangle of 17 thousand million cells is refused by its last cell."""
    book = openpyxl.load_workbook(io.BytesIO(workbook()))
    book["lanes"]["XFD1048576"] = "x"
    target = io.BytesIO()
    book.save(target)

    report = read(target.getvalue(), XLSX)

    assert refused(report) == (Status.UNREADABLE, "workbook_too_large")


def test_a_text_that_many_cells_share_counts_for_each() -> None:
    """A few kilobytes of workbook would come to gigabytes of texts."""
    book = with_part(workbook(), "xl/sharedStrings.xml", shared_strings("x" * 30_000))
    cells = "".join(f'<c r="A{row}" t="s"><v>0</v></c>' for row in range(1, 40_000))
    sheet = f"<worksheet><sheetData><row>{cells}</row></sheetData></worksheet>"
    body = with_part(book, "xl/worksheets/sheet1.xml", sheet.encode())

    assert refused(read(body, XLSX)) == (Status.UNREADABLE, "workbook_too_large")


def test_a_text_that_few_of_many_cells_share_is_read() -> None:
    """The most that it could come to is only looked at more closely."""
    texts = ["x" * 60_000, *"y" * 99]
    cells = "".join(f'<c r="A{row}" t="s"><v>1</v></c>' for row in range(1, 40_000))
    sheet = f"<worksheet><sheetData><row>{cells}</row></sheetData></worksheet>"
    book = with_part(workbook(), "xl/sharedStrings.xml", shared_strings(*texts))
    body = with_part(book, "xl/worksheets/sheet1.xml", sheet.encode())

    report = read(body, XLSX)

    assert report.status == Status.INVALID


def shared_strings(*texts: str) -> bytes:
    """Return the shared texts of a workbook."""
    items = "".join(f"<si><t>{text}</t></si>" for text in texts)
    space = "http://schemas.openxmlformats.org/spreadsheetml/2006/main"
    return f'<sst xmlns="{space}">{items}</sst>'.encode()


@pytest.mark.parametrize(
    ("part", "content"),
    [
        ("xl/workbook.xml", b"<workbook"),
        ("xl/worksheets/sheet1.xml", b"<worksheet><sheetData><row><c r="),
        ("xl/_rels/workbook.xml.rels", b"no xml"),
        ("[Content_Types].xml", b""),
    ],
)
def test_a_broken_workbook_is_unreadable_or_incomplete(part: str, content: bytes) -> None:
    """It is never half a network."""
    report = read(with_part(workbook(), part, content), XLSX)

    assert report.status in {Status.UNREADABLE, Status.INVALID} or part.startswith("[")


def test_entities_that_grow_are_stopped() -> None:
    """Ten lines of text that stand for a thousand million."""
    levels = "".join(f'<!ENTITY e{level} "{f"&e{level - 1};" * 10}">' for level in range(1, 10))
    bomb = f'<!DOCTYPE w [<!ENTITY e0 "ha">{levels}]><workbook>&e9;</workbook>'

    report = read(with_part(workbook(), "xl/workbook.xml", bomb.encode()), XLSX)

    assert report.status == Status.UNREADABLE


def test_a_zip_that_is_no_workbook_is_none() -> None:
    """And a workbook that is sent as a zip of tables holds no table."""
    assert refused(read(zipped(files()), XLSX)) == (Status.UNREADABLE, "broken_workbook")
    assert {told[1] for told in places(read(workbook(), ZIP))} >= {"unknown_file"}


def test_cells_are_seen_whatever_a_program_calls_them() -> None:
    """With a prefix, with other quotes, with the reference last; nothing hides behind that."""
    plain = b"""<c r="B7" t="e"><v>#N/A</v></c><c r='C8' t='e'><v>#REF!</v></c>"""
    other = (
        b"""<x:c s="1" t="e" r="B7"><x:v>#N/A</x:v></x:c><x:c t="e" r="C8"><x:v>#REF!</x:v></x:c>"""
    )
    for sheet in (plain, other):
        look = workbook_guard._Look()
        for piece in workbook_guard._whole_cells(iter([sheet[:20], sheet[20:70], sheet[70:]])):
            look.at(piece)

        assert {place: cell.value for place, cell in look.odd.items()} == {
            (6, 1): "#N/A",
            (7, 2): "#REF!",
        }


FAR = {
    "under another name": ("xl/far.xml", '<row r="1048576"><c r="XFD1048576"><v>1</v></c></row>'),
    "by an entity": (None, '<row r="1048576"><c r="XFD104857&#54;"><v>1</v></c></row>'),
    "by the row alone": (
        None,
        f'<row>{"<c/>" * 16_384}</row><row r="1048576"><c><v>1</v></c></row>',
    ),
    "behind another place": (None, '<row r="1"><c x:r="A1" r="XFD1048576"><v>1</v></c></row>'),
    "twice": (None, '<row r="1"><c r="A1" r="XFD1048576"><v>1</v></c></row>'),
    "over lines": (None, '<row r="1"><c\nr\n=\n"XFD1048576"><v>1</v></c></row>'),
    "in single quotes": (None, "<row r='1'><c r='XFD1048576'><v>1</v></c></row>"),
}


@pytest.mark.parametrize("how", FAR)
def test_a_far_cell_cannot_hide_from_the_guard(how: str) -> None:
    """The reader would lay out 17,000 million cells; the process would die of it."""
    part, far = FAR[how]
    sheet = f'<worksheet xmlns:x="x"><sheetData>{near_and(far)}</sheetData></worksheet>'.encode()
    book = with_part(workbook(), part or "xl/worksheets/sheet1.xml", sheet)
    if part is not None:
        relations = "xl/_rels/workbook.xml.rels"
        with zipfile.ZipFile(io.BytesIO(book)) as archive:
            named = archive.read(relations).replace(b"worksheets/sheet1.xml", part[3:].encode())
        book = with_part(book, relations, named)

    status, code = refused(read(book, XLSX))

    assert status == Status.UNREADABLE
    assert code in {"workbook_too_large", "broken_workbook"}


def near_and(far: str) -> str:
    """Return rows with a cell in the first place, so that the sheet spans all there is."""
    return '<row r="1"><c r="A1"><v>1</v></c></row>' + far


def test_a_sheet_in_characters_of_two_bytes_is_refused() -> None:
    """No pattern finds a cell in it."""
    sheet = '<worksheet><sheetData><row r="1"><c r="A1"/></row></sheetData></worksheet>'
    book = with_part(workbook(), "xl/worksheets/sheet1.xml", sheet.encode("utf-16"))

    assert refused(read(book, XLSX)) == (Status.UNREADABLE, "broken_workbook")


def test_a_picture_is_no_sheet() -> None:
    """Whatever bytes it has, those that begin a tag among them."""
    book = with_part(workbook(), "xl/media/image1.png", b"\x89PNG\0\0<c <row \0" * 5_000)

    assert read(book, XLSX).status == Status.ACCEPTED


def test_cells_that_stand_where_the_one_before_lets_them_are_read() -> None:
    """Not all programs write where a cell stands."""
    with zipfile.ZipFile(io.BytesIO(workbook())) as archive:
        names = [n for n in archive.namelist() if n.startswith("xl/worksheets/sheet")]
        parts = {name: archive.read(name) for name in names}
    book = workbook()
    for name, content in parts.items():
        placeless = re.sub(rb'(<(?:c|row)) r="[A-Z]*[0-9]+"', rb"\1", content)
        assert placeless != content
        book = with_part(book, name, placeless)

    assert read(book, XLSX).status == read(workbook(), XLSX).status == Status.ACCEPTED
