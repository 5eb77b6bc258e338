"""Evidence as a file: its form, its manifest, its history; and the program that it carries."""

import json
import os
import subprocess
import sys
import textwrap
from collections.abc import Callable
from pathlib import Path
from typing import Any

import orjson
import pytest
import rfc8785

from service.proof import evidence as evidence_module
from service.proof.evidence import verify_evidence, write_evidence
from service.proof.violations import CODES
from tests.evidence.test_verifiers_agree import both_verdicts
from tests.evidence.zips import Entries, entries_of, event, history, packed, repacked, sha256
from tests.unit.proof.by_hand import NETWORK, OPTIONS, documents

STANDALONE = Path(evidence_module.__file__).with_name("standalone.py")


def sound() -> bytes:
    """Return evidence of the plan from paper."""
    return packed(NETWORK, OPTIONS, *map(orjson.dumps, documents()))


def test_evidence_of_one_run_is_always_the_same_bytes() -> None:
    """Neither clock nor machine leave a trace."""
    assert sound() == sound()


def test_evidence_is_intact_and_holds_what_the_manifest_names(tmp_path: Path) -> None:
    """All entries but the manifest are named in it, with digests that anybody can take."""
    entries = entries_of(sound())
    manifest = json.loads(entries.pop("manifest.json"))

    assert both_verdicts(sound(), tmp_path) == ("intact", set())
    assert manifest["entries"] == {name: sha256(data) for name, data in entries.items()}
    assert entries["verify.py"] == STANDALONE.read_bytes()
    assert b"verify.py" in entries["README.txt"]


def _without(name: str) -> Callable[[Entries], bytes]:
    """Return a change that leaves an entry out and not out of the manifest."""
    return lambda entries: repacked(
        {key: data for key, data in entries.items() if key != name}, manifest=False
    )


def _with(name: str, data: bytes, *, manifest: bool = True) -> Callable[[Entries], bytes]:
    """Return a change that sets an entry."""
    return lambda entries: repacked({**entries, name: data}, manifest=manifest)


FILES: dict[str, tuple[str, str, Callable[[Entries], bytes]]] = {
    "cut off": ("unreadable", "zip_unreadable", lambda entries: repacked(entries)[:-1]),
    "manifest": ("unreadable", "manifest_malformed", _with("manifest.json", b"{}", manifest=False)),
    "needed": ("unreadable", "manifest_malformed", lambda e: repacked(
        {name: data for name, data in e.items() if name != "plan.json"})),
    "missing": ("broken", "entry_missing", _without("plan.json")),
    "unknown": ("broken", "entry_unknown", _with("more.txt", b"", manifest=False)),
    "changed": ("broken", "entry_changed", _with("plan.json", b"{}", manifest=False)),
    "network": ("broken", "network_malformed", _with("network/head.json", b"{}")),
    "column": ("broken", "network_malformed", _with("network/lanes/zebra", b"")),
    "options": ("broken", "options_malformed", _with("options.json", b"{}")),
    "plan": ("broken", "plan_malformed", _with("plan.json", b"{}")),
    "certificate": ("broken", "certificate_malformed", _with("certificate.json", b"[]")),
    "history": ("broken", "history_malformed", _with("history.json", b"{}")),
}  # fmt: skip


@pytest.mark.parametrize("name", FILES)
def test_file_that_is_not_as_it_was_written_is_named(name: str, tmp_path: Path) -> None:
    """One change, one code; the verdict says whether anything could be read."""
    verdict, code, change = FILES[name]

    assert both_verdicts(change(entries_of(sound())), tmp_path) == (verdict, {code})


def test_check_sum_of_an_entry_counts_too(tmp_path: Path) -> None:
    """A byte flipped on the way is found even where the manifest is not looked at."""
    data = bytearray(sound())
    data[data.index(b"Who wants to trust")] ^= 1

    assert both_verdicts(bytes(data), tmp_path) == ("broken", {"entry_changed"})


def _changed(number: int, place: str, value: Any) -> list[dict[str, Any]]:  # noqa: ANN401 - any JSON
    """Return the history with one field of one event changed, its hash put right."""
    events = history()
    fields = {**events[number]["event"], place: value}
    fields.pop("hash")
    events[number]["event"] = {**fields, "hash": sha256(rfc8785.dumps(fields))}
    return events


def _with_payload(payload: object) -> list[dict[str, Any]]:
    """Return the history with another payload of the first event."""
    events = history()
    events[0]["payload"] = payload
    return events


def _unsalted() -> list[dict[str, Any]]:
    """Return the history without the salt of the first payload."""
    events = history()
    events[0]["salt"] = None
    return events


def _renamed() -> list[dict[str, Any]]:
    """Return the history with another actor in the first event, whose hash stays."""
    events = history()
    events[0]["event"]["actor"] = "somebody"
    return events


HISTORIES: dict[str, tuple[str, list[dict[str, Any]]]] = {
    "another actor": ("event_hash", _renamed()),
    "a new chain": ("event_chain", _changed(1, "actor", "somebody")),
    "a gap": ("event_chain", [history()[0], history()[2]]),
    "no beginning": ("event_chain", history()[1:]),
    "exchanged": ("event_chain", [history()[1], history()[0]]),
    "twice": ("event_chain", [history()[0], history()[0]]),
    "seq": ("event_chain", _changed(2, "seq", 4)),
    "other payload": ("event_payload", _with_payload({"label": "morning"})),
    "payload gone": ("event_payload", _with_payload(None)),
    "payload with a fraction": ("event_payload", _with_payload({"label": 0.5})),
    "salt gone": ("event_payload", _unsalted()),
    "another format": ("history_malformed", _changed(0, "format", 2)),
    "another key": ("history_malformed", _changed(0, "zebra", 2)),
}


@pytest.mark.parametrize("name", HISTORIES)
def test_broken_history_is_named(name: str, tmp_path: Path) -> None:
    """No event can be changed, left out, added or moved, nor what it is about."""
    code, events = HISTORIES[name]
    data = json.dumps(events, ensure_ascii=False).encode()

    verdict, codes = both_verdicts(_with("history.json", data)(entries_of(sound())), tmp_path)

    assert verdict == "broken"
    assert code in codes
    assert codes <= {"event_chain", "event_hash", "event_payload", "history_malformed"}


def test_each_stream_is_a_chain_of_its_own(tmp_path: Path) -> None:
    """Two streams may be mixed; each begins with 1 and nothing before it."""
    first = history()
    other = event(1, "sha-256:" + "0" * 64, None)
    fields = {**other["event"], "stream": "admin"}
    fields.pop("hash")
    other["event"] = {**fields, "hash": sha256(rfc8785.dumps(fields))}
    data = rfc8785.dumps([first[0], other, first[1], first[2]])

    assert both_verdicts(_with("history.json", data)(entries_of(sound())), tmp_path) == (
        "intact",
        set(),
    )


def test_empty_history_is_intact(tmp_path: Path) -> None:
    """What is solved on the command line was never stored."""
    path = tmp_path / "evidence.zip"
    entries = entries_of(sound())
    parts = {name: data for name, data in entries.items() if name.startswith("network/")}
    plan, certificate = map(orjson.dumps, documents())

    write_evidence(
        path,
        network_entries=parts,
        options=OPTIONS,
        plan_bytes=plan,
        certificate_bytes=certificate,
        history=[],
        versions={},
    )

    assert verify_evidence(path).verdict == "intact"


# Refuses every module that is not the standard library's, or named; then runs what follows.
GUARD = """
import sys

allowed = set({allowed!r})

class Guard:
    def find_spec(self, name, path=None, target=None):
        top = name.partition(".")[0]
        if top not in sys.stdlib_module_names and top not in allowed:
            raise ImportError(f"{{name}} must not be imported")

sys.meta_path.insert(0, Guard())
sys.path.insert(0, {root!r})
"""


def _run(code: str, *, allowed: tuple[str, ...]) -> "subprocess.CompletedProcess[str]":
    """Run ``code`` in a fresh Python that can import nothing but what is allowed."""
    root = str(Path(evidence_module.__file__).parents[2])
    program = GUARD.format(allowed=allowed, root=root) + textwrap.dedent(code)
    return subprocess.run(
        [sys.executable, "-c", program], capture_output=True, text=True, check=False, timeout=120
    )


def test_proof_runs_with_python_and_numpy_alone(tmp_path: Path) -> None:
    """No solver, no pydantic, no orjson: whoever has NumPy can run the service's own checker."""
    path = tmp_path / "evidence.zip"
    path.write_bytes(sound())

    ran = _run(
        f"""
        from pathlib import Path
        from service.proof.evidence import verify_evidence
        verdict = verify_evidence(Path({str(path)!r}))
        print(verdict.verdict)
        assert "ortools" not in sys.modules and "scipy" not in sys.modules
        """,
        allowed=("service", "numpy"),
    )

    assert (ran.returncode, ran.stdout.strip()) == (0, "intact"), ran.stderr


def test_guard_refuses_other_packages() -> None:
    """Else the tests beside this one would prove nothing."""
    ran = _run("import orjson", allowed=("numpy",))

    assert ran.returncode == 1
    assert "orjson must not be imported" in ran.stderr


def test_standalone_runs_with_python_alone(tmp_path: Path) -> None:
    """The program in the zip needs neither this package nor any other."""
    path = tmp_path / "evidence.zip"
    path.write_bytes(sound())
    (tmp_path / "verify.py").write_bytes(entries_of(sound())["verify.py"])

    ran = _run(
        f"""
        import runpy
        sys.path.remove({str(Path(evidence_module.__file__).parents[2])!r})
        sys.argv = ["verify.py", {str(path)!r}]
        runpy.run_path({str(tmp_path / "verify.py")!r}, run_name="__main__")
        """,
        allowed=(),
    )

    assert (ran.returncode, ran.stdout.strip()) == (0, "intact"), ran.stderr


def _program(*arguments: str) -> "subprocess.CompletedProcess[str]":
    """Run the stand-alone verifier as an auditor does, in an empty environment."""
    return subprocess.run(
        [sys.executable, "-I", str(STANDALONE), *arguments],
        capture_output=True,
        text=True,
        check=False,
        timeout=120,
        env={"PATH": os.defpath},
    )


@pytest.mark.parametrize(
    ("name", "code", "last"),
    [("intact", 0, "intact"), ("missing", 1, "broken"), ("cut off", 2, "unreadable")],
)
def test_program_ends_with_the_code_of_its_verdict(
    name: str, code: int, last: str, tmp_path: Path
) -> None:
    """The last line is the verdict; each line before it is a problem with its code and place."""
    path = tmp_path / "evidence.zip"
    path.write_bytes(sound() if name == "intact" else FILES[name][2](entries_of(sound())))

    ran = _program(str(path))

    *problems, verdict = ran.stdout.splitlines()
    assert (ran.returncode, verdict, ran.stderr) == (code, last, "")
    assert all(line.partition(":")[0] in CODES for line in problems)
    assert bool(problems) == (name != "intact")


def test_program_says_how_it_is_used() -> None:
    """Without a file it is a mistake, with --help an answer; a missing file is unreadable."""
    assert (_program().returncode, "usage" in _program().stderr) == (2, True)
    assert (_program("--help").returncode, "usage" in _program("--help").stderr) == (0, True)
    assert _program("/nowhere/evidence.zip").returncode == 2


def test_program_does_not_print_what_a_terminal_would_obey(tmp_path: Path) -> None:
    """Names from a forged file reach the screen as plain letters."""
    plan, certificate = documents()
    plan["plan_lines"][0]["quantity"] = "4"
    certificate["items"][0]["prices"][0]["site"] = "\x1b[2J\u202e"
    path = tmp_path / "evidence.zip"
    path.write_bytes(packed(NETWORK, OPTIONS, orjson.dumps(plan), orjson.dumps(certificate)))

    ran = _program(str(path))

    assert ran.returncode == 1
    assert ran.stdout.replace("\n", "").isprintable()
    assert ran.stdout.isascii()


def test_both_verifiers_know_the_same_units_currencies_and_codes() -> None:
    """They were written separately; what is a table in both must be the same table."""
    from service.network.currencies import minor_units  # noqa: PLC0415 - beside its only use
    from service.network.units import TRADE_WORDS, UNITS  # noqa: PLC0415 - likewise
    from service.proof import standalone  # noqa: PLC0415 - likewise

    words = {word: UNITS[code] for word, code in TRADE_WORDS.items()}
    currencies = {code: n for n, codes in standalone.CURRENCIES.items() for code in codes}

    assert {**words, **UNITS} == standalone.STANDARD_UNITS
    assert all(minor_units(code) == decimals for code, decimals in currencies.items())
    letters = [chr(letter) for letter in range(ord("A"), ord("Z") + 1)]
    every = (a + b + c for a in letters for b in letters for c in letters)
    assert {code for code in every if minor_units(code) is not None} == set(currencies)
    text = STANDALONE.read_text()
    assert {code for code in CODES if f'"{code}"' not in text} == set()
