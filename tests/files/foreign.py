"""One network as other programs write it: pandas, polars, openpyxl, LibreOffice.

``python -m tests.files.foreign`` writes ``tests/files/data`` anew with the programs that are
installed; the tests read what is committed there, and with ``--long`` what is written now.
"""

import datetime as dt
import io
import shutil
import subprocess
import sys
import tempfile
from collections.abc import Callable, Mapping
from decimal import Decimal
from pathlib import Path
from typing import Any

import openpyxl
import pandas as pd
import polars as pl

from tests.files.writing import zipped

DATA = Path(__file__).parent / "data"

Table = Mapping[str, list[Any]]
# Typed as a program holds it: decimals, whole numbers, dates, texts; None where nothing is known.
TABLES: Mapping[str, Table] = {
    "network": {
        "format": [1],
        "name": ["Évening cut-off, kväll"],
        "currency": ["EUR"],
        "cut_off": ["2026-02-03T16:00:00+01:00"],
    },
    "items": {
        "id": ["0025", "BRINE"],
        "unit": ["bag", "l"],
        "step": [Decimal(1), Decimal("0.5")],
        "weight_kg": [Decimal("25.2"), Decimal("1.2")],
    },
    "packs": {"item": ["0025"], "unit": ["pallet"], "contains": [Decimal(40)]},
    "sites": {
        "id": ["NORTH", "HUB", "YARD-07", "YARD-12"],
        "roles": ["warehouse|cross_dock", "cross_dock", "ship_to", "ship_to"],
        "latitude": [Decimal("61.234567"), None, Decimal("60.9"), Decimal("-0.000001")],
        "handling_cost": [Decimal("0.04"), None, None, None],
        "handling_cost.BRINE": [None, Decimal("0.1"), None, None],
    },
    "supply": {
        "site": ["NORTH", "NORTH"],
        "item": ["0025", "BRINE"],
        "quantity": [Decimal(3200), Decimal("500.5")],
        "best_before": [dt.date(2026, 12, 31), None],
        "keep.quantity": [Decimal(10), None],
        "keep.priority": [3, None],
    },
    "demand": {
        "reference": ["SO-10077/1", "SO-10077/2", "00123"],
        "site": ["YARD-07", "YARD-12", "YARD-12"],
        "item": ["0025", "BRINE", "0025"],
        "quantity": [Decimal(880), Decimal("200.5"), Decimal(1)],
        "priority": [2, None, 9],
        "origins": [None, "NORTH", None],
        "extra.route": ["R7", "+1 =1", None],
    },
    "lanes": {
        "origin": ["NORTH", "NORTH", "HUB", "HUB"],
        "destination": ["YARD-07", "HUB", "YARD-07", "YARD-12"],
        "item": ["0025", None, "0025", "BRINE"],
        "unit_cost": [Decimal("0.215"), Decimal("0.11"), Decimal("-0.000001"), Decimal("0.16")],
        "capacity": [Decimal(700), None, None, Decimal("12345678901.125")],
        "carrier": [None, None, "Värmö Frakt", "C-ROAD"],
    },
}
WHOLE = {"priority", "keep.priority", "format"}


def frames() -> dict[str, pd.DataFrame]:
    """Return the tables as pandas holds them."""
    return {
        name: pd.DataFrame(
            {
                column: pd.array(cells, dtype="Int64") if column in WHOLE else cells
                for column, cells in table.items()
            }
        )
        for name, table in TABLES.items()
    }


def polars_frames() -> dict[str, pl.DataFrame]:
    """Return the tables as polars holds them."""
    return {name: pl.DataFrame(dict(table)) for name, table in TABLES.items()}


def pandas_csv() -> bytes:
    """Return what pandas writes as CSV by default."""
    return zipped(
        {f"{name}.csv": frame.to_csv(index=False).encode() for name, frame in frames().items()}
    )


def pandas_semicolons() -> bytes:
    """Return what pandas writes for a spreadsheet with decimal commas, in Windows' letters."""
    written = {}
    for name, frame in frames().items():
        # pandas turns the mark of floats only; a program that holds decimals writes its own text.
        text = frame.map(
            lambda cell: str(cell).replace(".", ",") if isinstance(cell, Decimal) else cell
        )
        written[f"{name}.csv"] = text.to_csv(index=False, sep=";", lineterminator="\r\n").encode(
            "cp1252"
        )
    return zipped(written | {"dialect.csv": b"encoding;decimal_mark\r\nwindows-1252;comma\r\n"})


def pandas_parquet() -> bytes:
    """Return what pandas writes as Parquet by default."""
    return zipped(
        {f"{name}.parquet": frame.to_parquet(index=False) for name, frame in frames().items()}
    )


def pandas_workbook() -> bytes:
    """Return what pandas writes as a workbook by default."""
    target = io.BytesIO()
    with pd.ExcelWriter(target, engine="openpyxl") as writer:
        for name, frame in frames().items():
            # It has no type for decimals there; a float of so few digits is exact.
            shown = frame.map(lambda cell: float(cell) if isinstance(cell, Decimal) else cell)
            shown.to_excel(writer, sheet_name=name, index=False)
    return target.getvalue()


def polars_csv() -> bytes:
    """Return what polars writes as CSV by default."""
    return zipped(
        {f"{name}.csv": frame.write_csv().encode() for name, frame in polars_frames().items()}
    )


def polars_parquet() -> bytes:
    """Return what polars writes as Parquet by default."""
    return zipped(
        {f"{name}.parquet": _bytes(frame.write_parquet) for name, frame in polars_frames().items()}
    )


def polars_arrow() -> bytes:
    """Return what polars writes as an Arrow file by default, texts as its views."""
    return zipped(
        {f"{name}.arrow": _bytes(frame.write_ipc) for name, frame in polars_frames().items()}
    )


def polars_workbook() -> bytes:
    """Return what polars writes as a workbook, a sheet for each table."""
    import xlsxwriter  # noqa: PLC0415 - polars takes the workbook that it writes into

    target = io.BytesIO()
    with xlsxwriter.Workbook(target, {"in_memory": True}) as workbook:
        for name, frame in polars_frames().items():
            frame.write_excel(workbook, worksheet=name)
    return target.getvalue()


def openpyxl_workbook() -> bytes:
    """Return what openpyxl writes of typed cells."""
    workbook = openpyxl.Workbook()
    assert workbook.active is not None
    workbook.remove(workbook.active)
    for name, table in TABLES.items():
        sheet = workbook.create_sheet(name)
        sheet.append(list(table))
        for number, row in enumerate(zip(*table.values(), strict=True), start=2):
            for place, cell in enumerate(row, start=1):
                sheet.cell(number, place).value = cell
                if isinstance(cell, str):
                    sheet.cell(number, place).data_type = "s"
    target = io.BytesIO()
    workbook.save(target)
    return target.getvalue()


def libreoffice_workbook() -> bytes:
    """Return the workbook of openpyxl as LibreOffice saves it."""
    return resaved(openpyxl_workbook())


def libreoffice_csv() -> bytes:
    """Return every sheet as LibreOffice saves it as CSV: semicolons, texts in quotes."""
    sheets = sheets_as_csv(openpyxl_workbook())
    return zipped({f"{name}.csv": data for name, data in sheets.items()})


def resaved(workbook: bytes) -> bytes:
    """Return a workbook as LibreOffice saves it."""
    program = office()
    with tempfile.TemporaryDirectory() as folder:
        source, target = Path(folder) / "network.xlsx", Path(folder) / "out"
        source.write_bytes(workbook)
        _convert(program, source, "xlsx:Calc MS Excel 2007 XML", target)
        return (target / source.name).read_bytes()


def sheets_as_csv(workbook: bytes) -> dict[str, bytes]:
    """Return every sheet of a workbook as LibreOffice saves it as CSV."""
    program = office()
    with tempfile.TemporaryDirectory() as folder:
        source = Path(folder) / "network.xlsx"
        source.write_bytes(workbook)
        # 59: semicolon; 34: quotes; 76: UTF-8; then quoted texts, cells as they are shown: no; -1:
        # every sheet into a file of its own.
        form = "csv:Text - txt - csv (StarCalc):59,34,76,1,,0,true,true,false,false,false,-1"
        _convert(program, source, form, Path(folder))
        return {
            path.stem.removeprefix("network-"): path.read_bytes()
            for path in Path(folder).glob("network-*.csv")
        }


def _convert(program: str, source: Path, form: str, target: Path) -> None:
    command = [program, "--headless", f"-env:UserInstallation=file://{source.parent}/profile"]
    command += ["--convert-to", form, "--outdir", str(target), str(source)]
    subprocess.run(command, check=True, capture_output=True, timeout=180)


def office() -> str:
    """Return LibreOffice; raise with what to do where it is not installed."""
    program = shutil.which("soffice") or shutil.which("libreoffice")
    if program is None:
        raise FileNotFoundError(
            "LibreOffice is not installed, which --long needs: apt-get install libreoffice-calc"
        )
    return program


def _bytes(write: Callable[[io.BytesIO], object]) -> bytes:
    target = io.BytesIO()
    write(target)
    return target.getvalue()


FOREIGN: Mapping[str, tuple[str, Callable[[], bytes]]] = {
    "pandas-csv.zip": ("zip", pandas_csv),
    "pandas-semicolons.zip": ("zip", pandas_semicolons),
    "pandas-parquet.zip": ("zip", pandas_parquet),
    "pandas.xlsx": ("xlsx", pandas_workbook),
    "polars-csv.zip": ("zip", polars_csv),
    "polars-parquet.zip": ("zip", polars_parquet),
    "polars-arrow.zip": ("zip", polars_arrow),
    "polars.xlsx": ("xlsx", polars_workbook),
    "openpyxl.xlsx": ("xlsx", openpyxl_workbook),
    "libreoffice.xlsx": ("xlsx", libreoffice_workbook),
    "libreoffice-csv.zip": ("zip", libreoffice_csv),
}


def main() -> None:
    """Write every file anew, or only those that the arguments name."""
    DATA.mkdir(exist_ok=True)
    for name in sys.argv[1:] or FOREIGN:
        (DATA / name).write_bytes(FOREIGN[name][1]())


if __name__ == "__main__":
    main()
