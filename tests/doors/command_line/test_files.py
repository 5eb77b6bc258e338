"""What commands read and write: files of every form, folders, workbooks."""

import gzip
import io
import os
import zipfile
from pathlib import Path

import openpyxl
import pytest
import zstandard

from service.doors.plan_tables import COLUMNS
from service.network.files.media_types import ARROW, CSV, JSON, PARQUET, XLSX, ZIP
from tests.doors.command_line.work import FakeWork, Run
from tests.files.writing import zipped


@pytest.mark.parametrize(
    ("name", "content", "told"),
    [
        ("network.json.gz", b"", (JSON, "gzip")),
        ("network", gzip.compress(b"{}"), (JSON, "gzip")),
        ("network.zst", zstandard.compress(zipped({"lanes.csv": b""})), (ZIP, "zstd")),
        ("network", zipped({"lanes.csv": b""}), (ZIP, None)),
        ("network.zip", zipped({"xl/workbook.xml": b""}), (XLSX, None)),
        ("network.xlsx", b"no zip", (XLSX, None)),
        ("network.xlsx.gz", gzip.compress(zipped({"xl/workbook.xml": b""})), (XLSX, "gzip")),
        ("lanes.parquet", b"PAR1", (PARQUET, None)),
        ("lanes", b"ARROW1", (ARROW, None)),
        ("lanes.csv", b"origin,destination", (CSV, None)),
    ],
)
def test_a_file_says_what_it_is(
    run: Run, tmp_path: Path, name: str, content: bytes, told: tuple[str, str | None]
) -> None:
    """No option says it: its bytes do, and its name where they do not."""
    path = tmp_path / name
    path.write_bytes(content)
    work = FakeWork()

    run("check", path, work=work)

    assert (work.asked["media_type"], work.asked["content_encoding"]) == told


def test_a_folder_is_the_same_zip_each_time(run: Run, tmp_path: Path) -> None:
    """Its digest is taken over names and bytes alone, not over when they were written."""
    bodies: list[bytes] = []
    kinds = set()
    for place, order in (("one", ("b.csv", "a.csv")), ("other", ("a.csv", "b.csv"))):
        folder = tmp_path / place
        folder.mkdir()
        for number, name in enumerate(order):
            (folder / name).write_text(name, encoding="ascii")
            os.utime(folder / name, (number, 10**9 + number))
        work = FakeWork()
        run("check", folder, work=work)
        bodies.append(bytes(work.asked["body"]))  # type: ignore[call-overload] # bytes it is
        kinds.add(work.asked["media_type"])

    assert kinds == {ZIP}
    assert bodies[0] == bodies[1]
    with zipfile.ZipFile(io.BytesIO(bodies[0])) as archive:
        assert archive.namelist() == ["a.csv", "b.csv"]


def test_a_template_is_written_once(run: Run, tmp_path: Path) -> None:
    """A workbook that somebody has begun to fill in is never replaced."""
    path = tmp_path / "network.xlsx"

    first = run("template", path)
    written = path.read_bytes()
    second = run("template", path)

    assert (first[0], second[0]) == (0, 2)
    assert path.read_bytes() == written
    assert run("template", tmp_path / "nowhere" / "network.xlsx")[0] == 1


def test_a_plan_goes_to_files(run: Run, network: Path, tmp_path: Path) -> None:
    """The summary stays what is shown; the files are there besides."""
    workbook, folder = tmp_path / "plan.xlsx", tmp_path / "plan"

    code, out, _ = run("solve", network, "--xlsx", workbook, "--parquet", folder)

    assert code == 0
    assert "1 order line." in out
    assert openpyxl.load_workbook(workbook)["site_use"]["C2"].value == 9
    assert sorted(path.stem for path in folder.iterdir()) == sorted(COLUMNS)


def test_a_plan_that_cannot_be_written_is_said(run: Run, network: Path, tmp_path: Path) -> None:
    """A person who waits for a file must not find out later that there is none."""
    for option, path in (("--xlsx", tmp_path / "no" / "plan.xlsx"), ("--parquet", network)):
        code, out, err = run("solve", network, option, path)

        assert (code, out) == (1, "")
        assert f"{path} cannot be written" in err
