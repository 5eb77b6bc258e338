"""What the tree may hold: short files, no other host, no path of one machine, no silent skips."""

import re
import subprocess
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
LINES_MAX = 350
# Longer on purpose, each with its reason.
LONG_FILES = {
    "service/proof/standalone.py": "one file by design: it goes into every evidence zip",
}
# Hosts that documents may name: reserved names, this machine, and the homes of open standards.
HOSTS = {
    "127.0.0.1",
    "127",  # the same in a pattern, where its points are escaped
    "localhost",
    "testserver",
    "www.apache.org",
    "json-schema.org",
    "spec.openapis.org",
    "www.rfc-editor.org",
    "keepachangelog.com",
    "www.w3.org",
    "schemas.openxmlformats.org",  # a name space of ECMA-376, nothing that is asked for
}
RESERVED = (".example", ".test", ".invalid", ".localhost", "example.com", "example.org")
# Files of others that are stored as they came, with their own links.
FOREIGN = ("LICENSE", "service/doors/http/static/", "tests/published/data/")


def tracked() -> list[Path]:
    """Return every file under version control."""
    result = subprocess.run(
        ["git", "ls-files", "-z"],  # noqa: S607 - whoever has a clone has git
        cwd=ROOT,
        capture_output=True,
        text=True,
        check=True,
    )
    paths = [ROOT / name for name in result.stdout.split("\0") if name]
    return [path for path in paths if path.is_file()]


def texts(*endings: str) -> list[tuple[str, str]]:
    """Return (name, text) of every tracked text file with one of ``endings``, or of all."""
    found = []
    for path in tracked():
        name = path.relative_to(ROOT).as_posix()
        if endings and not name.endswith(endings):
            continue
        try:
            found.append((name, path.read_text(encoding="utf-8")))
        except UnicodeDecodeError:
            continue  # a zip or an image
    return found


def test_no_file_of_python_is_too_long_to_read() -> None:
    """A file that grows is split by noun; the few that may not be are named with their reason."""
    lengths = {name: text.count("\n") for name, text in texts(".py") if name not in LONG_FILES}

    assert {name: lines for name, lines in lengths.items() if lines > LINES_MAX} == {}


def test_every_exception_to_the_length_is_still_one() -> None:
    """An exception that outlives its reason invites the next."""
    for name in LONG_FILES:
        assert (ROOT / name).read_text(encoding="utf-8").count("\n") > LINES_MAX


def test_no_other_host_is_named() -> None:
    """Nothing here may call, load from or advertise another machine."""
    url = re.compile(r"https?://([A-Za-z0-9.\-]+)")
    named = {
        f"{name}: {host}"
        for name, text in texts()
        if not name.startswith(FOREIGN)
        for host in url.findall(text)
        if host.lower() not in HOSTS and not host.lower().endswith(RESERVED)
    }

    assert named == set()


def test_no_path_of_one_machine_is_written_down() -> None:
    """What holds on one machine is a lie on the next."""
    # Written in two parts so that this file does not find itself.
    machine = re.compile("(?<![A-Za-z0-9_.~-])/" + r"(?:work|root|home|Users|opt)/[A-Za-z0-9_]+")
    found = {
        f"{name}: {match}"
        for name, text in texts()
        if not name.startswith(FOREIGN)
        for match in machine.findall(text)
    }

    assert found == set()


def test_the_lock_names_packages_and_hashes_and_nothing_else() -> None:
    """A registry in the lock would decide for everybody where packages come from."""
    lines = (ROOT / "requirements.lock").read_text(encoding="utf-8").splitlines()
    allowed = re.compile(
        r"^(?:[a-zA-Z0-9._-]+(?:\[[a-z,]+\])?==\S+(?: ; [^\\]+)? \\"
        r"|    --hash=sha256:[0-9a-f]{64}(?: \\)?|\s*#(?!.*://).*)$"
    )

    assert [line for line in lines if not allowed.match(line)] == []


@pytest.mark.parametrize(
    "mark",
    [
        "mark." + "skip",
        "pytest." + "skip(",
        "import" + "orskip",
        "mark." + "xfail",
        "mock." + "patch",
    ],
)
def test_no_test_is_skipped_or_patched(mark: str) -> None:
    """A skipped test is a green light with nobody behind it."""
    assert [name for name, text in texts(".py") if name.startswith("tests/") and mark in text] == []


def test_every_silenced_check_says_why() -> None:
    """``noqa`` and ``type: ignore`` name their rule and their reason in the line."""
    silenced = re.compile("# " + r"(?:noqa|type: ignore)\b.*")
    reasoned = re.compile(
        "# " + r"noqa: [A-Z]+[0-9]+(?:, ?[A-Z]+[0-9]+)* - \S"
        "|# " + r"type: ignore\[[a-z, -]+\] +# \S"
        "|# " + r"ruff: noqa: [A-Z]+[0-9]+ - \S"
    )
    found = [
        f"{name}: {match}"
        for name, text in texts(".py")
        for match in silenced.findall(text)
        if not reasoned.search(match)
    ]

    assert found == []
