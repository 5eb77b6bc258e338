"""The columns of files are the fields of the definition: each has one, and none has two."""

import pytest

from service.network.definition import (
    RULE_PARTS,
    Control,
    Head,
    ItemPart,
    LanePick,
    PackPart,
    SitePart,
    StoragePart,
)

from service.network.definition import ItemPick, SitePick  # isort: skip
from service.network.files.table_columns import FAMILIES, TABLES, WANTED, Kind, field_of
from service.network.money_definition import ExchangeRatePart, TariffPart
from service.network.not_yet import NOT_YET_FIELDS
from service.network.table_fields import REQUIRED_FIELDS, TABLE_FIELDS
from tests.files.reading import files, places, read


def names(part: type) -> set[str]:
    """Return the names that the fields of a part of the definition have in JSON."""
    return {field.alias or name for name, field in part.model_fields.items()}  # type: ignore[attr-defined] # a model


@pytest.mark.parametrize("table", TABLE_FIELDS)
def test_the_big_tables_have_a_column_for_each_field(table: str) -> None:
    """``keep`` is an object, so it has a column for each of its fields."""
    columns = {"keep" if "." in name else name for name in TABLES[table]}

    assert columns == set(TABLE_FIELDS[table])
    needed = {name for name, field in TABLES[table].items() if field.needed}
    assert needed == set(REQUIRED_FIELDS[table])


def test_the_small_tables_have_a_column_for_each_field() -> None:
    """Packs are a table of their own, selectors columns with a point."""
    picks = {"lanes": LanePick, "sites": SitePick, "items": ItemPick}
    rules = set().union(*map(names, RULE_PARTS.values()))

    assert set(TABLES["network"]) == names(Head) - {"storage"}
    assert set(TABLES["storage"]) == names(StoragePart)
    assert set(TABLES["items"]) == names(ItemPart) - {"packs"}
    assert set(TABLES["packs"]) == names(PackPart) | {"item"}
    assert set(TABLES["sites"]) == names(SitePart)
    assert set(TABLES["control"]) == names(Control)
    assert set(TABLES["exchange_rates"]) == names(ExchangeRatePart)
    assert set(TABLES["tariffs"]) == names(TariffPart)
    assert set(TABLES["rules"]) == rules | {
        f"{name}.{key}" for name, part in picks.items() for key in names(part)
    }


@pytest.mark.parametrize("table", TABLES)
def test_what_is_needed_is_what_the_check_asks_for(table: str) -> None:
    """Notes in the template must not promise that a field may be left out."""
    parts = {
        "network": Head,
        "items": ItemPart,
        "packs": PackPart,
        "sites": SitePart,
        "exchange_rates": ExchangeRatePart,
        "tariffs": TariffPart,
        "storage": StoragePart,
    }
    if table in parts:
        fields = parts[table].model_fields  # type: ignore[attr-defined] # a model
        needed = {name for name, field in fields.items() if field.is_required()}
        assert {name for name, field in TABLES[table].items() if field.needed} == needed | (
            {"item"} if table == "packs" else set()
        )
    assert (table in WANTED) == (
        table in {"network", "items", "sites", "supply", "demand", "lanes"}
    )


@pytest.mark.parametrize(
    ("table", "name"),
    [
        (table, name)
        for table in ("items", "supply", "demand", "lanes")
        for name in NOT_YET_FIELDS[table]
    ],
)
def test_columns_that_are_not_built_are_refused_by_name(table: str, name: str) -> None:
    """A date that is ignored would be a promise."""
    sent = files()
    header, rows = sent[f"{table}.csv"].decode().split("\n", 1)
    cells = "".join(f"{row},1\n" for row in rows.splitlines())

    report = read(sent | {f"{table}.csv": f"{header},{name}\n{cells}".encode()})

    assert places(report) == [(f"{table}.csv!column {name}", "not_yet", None)]


def test_families_of_columns_are_where_they_belong() -> None:
    """``extra`` where the definition has it, costs by item at sites alone."""
    for table, columns in TABLES.items():
        assert (field_of(table, "extra.a.b") is None) == ("extra" not in columns)
        assert (field_of(table, "handling_cost.I") is None) == (table != "sites")
        assert field_of(table, "extra.") is None
    assert FAMILIES["extra"].kind is Kind.TEXT
