"""Evidence, format 1: one zip with which a stranger can check a plan, its proof and its history.

The bytes depend on nothing but what is in it. It holds the network in normal form, options, plan,
certificate, history, a verifier that needs nothing but Python, and a page of explanation; the
manifest names the digest of everything else.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Final, Literal

from service.network.canonical import (
    HEAD_ENTRY,
    NormalFormError,
    canonical_json,
    digest,
    network_from_entries,
)
from service.network.canonical_json import NotCanonicalError
from service.network.columns import Network
from service.network.options import Options
from service.network.stored_zip import ZipFormError, read_stored_zip, write_stored_zip
from service.network.strict_json import StrictJsonError, strict_json
from service.proof.check import check_documents
from service.proof.history import check_history
from service.proof.shapes import is_digest, is_texts, one_of, record
from service.proof.violations import Findings, Violation

FORMAT: Final = 1
MANIFEST: Final = "manifest.json"
_FORMATS: Final = {"certificate": 1, "event": 1, "network": 1, "plan": 1}
_NEEDED: Final = (
    "README.txt",
    "certificate.json",
    "history.json",
    HEAD_ENTRY,
    "options.json",
    "plan.json",
    "verify.py",
)

_README: Final = """\
This file is the evidence of one planning run. It can be checked without the service that made it:

    python3 verify.py EVIDENCE.zip

where EVIDENCE.zip is the zip that this page came in, and verify.py lies beside this page. Python
3.9 or later is needed, nothing else. It prints one line for each problem and ends with
0 (intact), 1 (broken) or 2 (unreadable). Who wants to trust nothing reads verify.py first; it is
one file.

manifest.json      the SHA-256 of every other entry
network/           what was asked, in normal form: a head in JSON and one file for each column
options.json       how it was to be planned
plan.json          the plan: what is shipped from where to where, and at what cost
certificate.json   the proof: flows, node prices and weights that show that no plan is better
history.json       who did what when; each event names the hash of the one before
"""


@dataclass(frozen=True, slots=True, kw_only=True)
class Verdict:
    """What a check of evidence comes to. Only ``intact`` has no problems."""

    verdict: Literal["intact", "broken", "unreadable"]
    problems: tuple[Violation, ...]


def write_evidence(  # noqa: PLR0913 - one argument for each part of the evidence
    path: Path,
    *,
    network_entries: Mapping[str, bytes],
    options: Options,
    plan_bytes: bytes,
    certificate_bytes: bytes,
    history: Sequence[Mapping[str, Any]],
    versions: Mapping[str, str],
) -> None:
    """Write the evidence of one run to ``path``.

    ``history`` are event documents in the order of their stream, empty where nothing was stored.
    """
    entries = {
        **network_entries,
        "README.txt": _README.encode(),
        "certificate.json": certificate_bytes,
        "history.json": canonical_json([dict(event) for event in history]),
        "options.json": canonical_json(options.to_document()),
        "plan.json": plan_bytes,
        "verify.py": Path(__file__).with_name("standalone.py").read_bytes(),
    }
    manifest = {
        "format": FORMAT,
        "formats": _FORMATS,
        "versions": dict(versions),
        "entries": {name: digest(content) for name, content in entries.items()},
    }
    write_stored_zip(path, {**entries, MANIFEST: canonical_json(manifest)})


def verify_evidence(path: Path) -> Verdict:
    """Return the verdict on the evidence at ``path``, whatever is there.

    Raises ``OSError`` only where the file cannot be opened at all.
    """
    findings = Findings()
    try:
        entries, damaged = read_stored_zip(path.read_bytes())
    except ZipFormError as error:
        findings.add("zip_unreadable", str(error))
        return _verdict("unreadable", findings)
    listed = _listed(entries.pop(MANIFEST, b""))
    if listed is None:
        findings.add("manifest_malformed", "no manifest of this format", place=MANIFEST)
        return _verdict("unreadable", findings)
    for name in damaged:
        findings.add("entry_changed", "its check sum is wrong", place=name)
    for name in sorted(listed.keys() | entries.keys()):
        if name not in entries:
            findings.add("entry_missing", "the manifest names it", place=name)
        elif name not in listed:
            findings.add("entry_unknown", "the manifest does not name it", place=name)
        elif digest(entries[name]) != listed[name]:
            findings.add("entry_changed", f"it is {digest(entries[name])}", place=name)
    if not findings:
        _check_entries(entries, findings)
    return _verdict("broken" if findings else "intact", findings)


def _verdict(verdict: Literal["intact", "broken", "unreadable"], findings: Findings) -> Verdict:
    """Return a verdict with its reasons."""
    return Verdict(verdict=verdict, problems=findings.violations())


_MANIFEST = record(
    {
        "format": one_of(FORMAT),
        "formats": record({name: one_of(number) for name, number in _FORMATS.items()}),
        "versions": is_texts,
        "entries": is_texts,
    }
)


def _listed(data: bytes) -> dict[str, str] | None:
    """Return the digests by entry that a manifest lists, None if it is none of this format."""
    try:
        manifest = strict_json(data)
        canonical = canonical_json(manifest)
    except (StrictJsonError, NotCanonicalError):
        return None
    if canonical != data or _MANIFEST(manifest) is not None or not isinstance(manifest, dict):
        return None
    listed: dict[str, str] = manifest["entries"]
    sound = all(is_digest(value) is None for value in listed.values())
    return listed if sound and set(_NEEDED) <= set(listed) else None


def _check_entries(entries: Mapping[str, bytes], findings: Findings) -> None:
    """Note what is wrong with entries that are those of the manifest."""
    network = _network(entries, findings)
    options = _options(entries["options.json"], findings)
    documents = {}
    for code, name in (
        ("plan_malformed", "plan.json"),
        ("certificate_malformed", "certificate.json"),
        ("history_malformed", "history.json"),
    ):
        try:
            documents[name] = strict_json(entries[name])
        except StrictJsonError as error:
            findings.add(code, str(error), place=name)
    if "history.json" in documents:
        check_history(documents["history.json"], findings)
    if (
        network is None
        or options is None
        or not {"plan.json", "certificate.json"} <= set(documents)
    ):
        return
    proof = Findings()
    check_documents(
        network,
        options,
        documents["plan.json"],
        documents["certificate.json"],
        digests=(digest(entries[HEAD_ENTRY]), digest(entries["options.json"])),
        findings=proof,
    )
    findings.take(proof)


def _network(entries: Mapping[str, bytes], findings: Findings) -> Network | None:
    """Return the network in ``entries``, None if there is none."""
    parts = {name: data for name, data in entries.items() if name.startswith("network/")}
    try:
        return network_from_entries(parts)
    except NormalFormError as error:
        findings.add("network_malformed", str(error), place="network")
        return None


def _options(data: bytes, findings: Findings) -> Options | None:
    """Return the options in ``data``, None if there are none."""
    try:
        document = strict_json(data)
        if isinstance(document, dict) and canonical_json(document) == data:
            return Options.from_document(document)
        findings.add("options_malformed", "not canonical JSON of an object", place="options.json")
    except (ValueError, NotCanonicalError) as error:
        findings.add("options_malformed", str(error), place="options.json")
    return None
