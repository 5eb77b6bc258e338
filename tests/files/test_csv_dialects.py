"""CSV as integration teams meet it: what is certain is read, all else is a fault with a place."""

import re

import pytest

from tests.files.reading import TABLES, cautions, digest, files, places, read

PLAIN = digest(read(files()))


def semicolons(text: str) -> str:
    """Return a table with semicolons between cells and a comma in its decimals."""
    return re.sub(r"(?<=\d)\.(?=\d)", ",", text.replace(",", ";"))


GERMAN = {name: semicolons(text) for name, text in TABLES.items()}


def test_semicolons_and_decimal_commas_are_the_same_network() -> None:
    """Each file shows the comma beyond doubt; the plan says how its numbers were read."""
    report = read(files(**GERMAN))

    assert digest(report) == PLAIN
    assert cautions(report) == {
        "decimal_comma_detected": [
            ("demand.csv!row 2,quantity", "880,5"),
            ("items.csv!row 2,step", "0,1"),
            ("lanes.csv!row 2,unit_cost", "0,215"),
        ]
    }


@pytest.mark.parametrize(
    "dialect",
    ["decimal_mark\ncomma\n", "field;value\ndecimal_mark;comma\n", "decimal_mark\r\ncomma"],
)
def test_a_stated_decimal_comma_leaves_no_doubt(dialect: str) -> None:
    """Whoever states it is not warned, and quoted decimal commas work with commas between cells."""
    quoted = {
        "lanes": 'origin,destination,unit_cost\nNORTH,YARD,"0,215"\n',
        "items": 'id,unit,step\n0025,bag,"0,1"\n',
        "demand": 'reference,site,item,quantity\nSO-1,YARD,0025,"880,5"\n',
    }

    for texts in (GERMAN, quoted):
        report = read(files(**texts, dialect=dialect))
        assert digest(report) == PLAIN
        assert cautions(report) == {}


@pytest.mark.parametrize("number", ["1,200", "1.200", "12,345", "999.000"])
def test_a_mark_that_may_part_thousands_is_not_guessed(number: str) -> None:
    """1.200 bags may be one bag or more than a thousand: a plan must not depend on luck."""
    lanes = f"origin;destination;unit_cost\nNORTH;YARD;{number}\n"

    report = read(files(lanes=lanes))

    assert places(report) == [("lanes.csv!row 2,unit_cost", "ambiguous_decimal_mark", number)]
    assert "dialect.csv" in report.faults[0].detail


@pytest.mark.parametrize(
    ("mark", "number", "value"),
    [("comma", "1,2", "1.2"), ("point", "1.2", "1.2"), ("point", "1.200", "1.2")],
)
def test_a_stated_mark_is_believed(mark: str, number: str, value: str) -> None:
    """Then 1.200 means what it says."""
    texts = {**(GERMAN if mark == "comma" else TABLES)}
    stated = texts | {
        "lanes": f"origin;destination;unit_cost\nNORTH;YARD;{number}\n",
        "dialect": f"decimal_mark\n{mark}\n",
    }
    plain = {**TABLES, "lanes": TABLES["lanes"].replace("0.215", value)}

    assert digest(read(files(**stated))) == digest(read(files(**plain)))


def test_thousands_are_never_parted() -> None:
    """Where the comma is certain, a point in a number is a fault, shown as it was written."""
    supply = "site;item;quantity;unit_cost\nNORTH;0025;1.900;0,5\n"

    report = read(files(supply=supply))

    assert places(report) == [("supply.csv!row 2,quantity", "not_a_number", "1.900")]


def test_two_certain_marks_in_one_file_contradict_each_other() -> None:
    """One of them must be wrong; which, the sender has to say."""
    supply = "site;item;quantity;unit_cost\nNORTH;0025;900.5;0,5\n"

    report = read(files(supply=supply))

    assert places(report) == [("supply.csv!row 2,quantity", "ambiguous_decimal_mark", "900.5")]


def test_each_file_shows_its_own_mark() -> None:
    """Lanes typed in a spreadsheet lie beside orders that a program wrote."""
    mixed = {**TABLES, "lanes": GERMAN["lanes"], "supply": GERMAN["supply"]}

    assert digest(read(files(**mixed))) == PLAIN


@pytest.mark.parametrize("line_end", ["\n", "\r\n", "\r"])
@pytest.mark.parametrize("separator", [",", ";", "\t"])
def test_separators_and_line_ends_are_found_out(separator: str, line_end: str) -> None:
    """The header has names that are known, and only one separator parts them."""
    texts = {
        name: text.replace(",", separator).replace("\n", line_end) for name, text in TABLES.items()
    }

    assert digest(read(files(**texts))) == PLAIN


def test_a_line_that_names_the_separator_is_believed() -> None:
    """Some spreadsheet programs write it; rows are still counted as they show them."""
    lanes = "sep=;\norigin;destination;unit_cost\nNORTH;YARD;0.215\n"

    assert digest(read(files(lanes=lanes))) == PLAIN
    report = read(files(lanes=lanes.replace("YARD", "YRAD")))
    assert places(report) == [("lanes.csv!row 3,destination", "unknown_site", "YRAD")]


def test_a_header_that_can_be_parted_in_two_ways_is_a_fault() -> None:
    """One known name with each separator: neither is certain."""
    report = read(files(lanes="origin,destination;unit_cost\n"))

    assert places(report) == [
        ("lanes.csv!row 1", "ambiguous_separator", "origin,destination;unit_cost")
    ]


def test_a_header_without_a_known_name_is_a_fault() -> None:
    """A file without a header would lose its first row in silence."""
    report = read(files(lanes="NORTH,YARD,0.215\n"))

    assert places(report) == [("lanes.csv!row 1", "unknown_header", "NORTH,YARD,0.215")]
    assert "origin, destination" in report.faults[0].detail


@pytest.mark.parametrize("name", ["lanes", "demand", "items"])
def test_a_byte_order_mark_changes_nothing(name: str) -> None:
    """Spreadsheet programs put one in front of UTF-8."""
    texts = {name: b"\xef\xbb\xbf" + TABLES[name].encode()}

    assert digest(read(files(**texts))) == PLAIN


def with_yard(name: str) -> dict[str, str]:
    """Return the tables with another name for the yard."""
    return {table: text.replace("YARD", name) for table, text in TABLES.items()}


@pytest.mark.parametrize(("encoding", "name"), [("latin-1", "Värmö"), ("cp1252", "Værft €")])
def test_letters_that_are_not_utf_8_are_doubted(encoding: str, name: str) -> None:
    """They are read, and the plan shows where, so that somebody looks at them."""
    texts = {table: text.encode(encoding) for table, text in with_yard(name).items()}

    report = read(files(**texts))

    assert digest(report) == digest(read(files(**with_yard(name))))
    assert cautions(report)["encoding_detected"][0] == (
        "demand.csv!row 2",
        f"SO-1,{name},0025,880.5",
    )


def test_letters_that_are_stated_are_not_doubted() -> None:
    """dialect.csv says so, once for all files."""
    texts: dict[str, str | bytes] = {
        table: text.encode("latin-1") for table, text in with_yard("Värmö").items()
    }

    report = read(files(**texts, dialect="encoding\nlatin-1\n"))

    assert digest(report) == digest(read(files(**with_yard("Värmö"))))
    assert cautions(report) == {}


@pytest.mark.parametrize(
    ("data", "dialect", "detail"),
    [
        (b"id,roles\n\x81,ship_to\n", None, "byte 10 does not fit"),
        ("id,roles\n\xe4,ship_to\n".encode("latin-1"), "encoding\nutf-8\n", "Not utf-8: byte 10"),
        ("id,roles\n".encode("utf-16"), None, "UTF-16"),
    ],
)
def test_letters_that_cannot_be_told_are_a_fault(
    data: bytes, dialect: str | None, detail: str
) -> None:
    """No byte is dropped or replaced to get on."""
    report = read(files(sites=data, dialect=dialect))

    assert [told[:2] for told in places(report)] == [("sites.csv", "not_utf8")]
    assert detail in report.faults[0].detail


def test_dialects_that_do_not_exist_are_faults() -> None:
    """A typing error there would change every number."""
    report = read(files(dialect="decimal_mark,encoding,colour\ndot,utf8,red\n"))

    assert sorted(places(report)) == [
        ("dialect.csv!column colour", "unknown_field", None),
        ("dialect.csv!row 2,decimal_mark", "bad_choice", "dot"),
        ("dialect.csv!row 2,encoding", "bad_choice", "utf8"),
    ]
