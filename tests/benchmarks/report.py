"""The report: one JSON document, and the tables that stand in the README, made from it alone."""

from collections.abc import Iterable, Mapping, Sequence
from typing import Any, Final

from tests.benchmarks.campaign import COLD, LEMON, WARM, R
from tests.benchmarks.figures import profile, ratio, seconds, solve_and_proof

Record = Mapping[str, Any]

BEGIN: Final = "<!-- benchmarks: begin -->"
END: Final = "<!-- benchmarks: end -->"

_SOLVERS: Final = (R, LEMON, COLD, WARM, "SciPy HiGHS", "networkx")
_WORDS: Final = {"stretch": "**beyond**", "met": "met", "missed": "missed", "not run": "not run"}


def markdown(document: Mapping[str, Any]) -> str:
    """Return the tables of a run."""
    parts = [_made(document), _goals(document["goals"]), _solvers(document["networks"])]
    parts += [_profiles(document), _growth(document["growth"]), _rest(document)]
    return "\n\n".join(part for part in parts if part)


def with_block(text: str, block: str) -> str:
    """Return ``text`` with ``block`` between the two marks; raise ``ValueError`` without them."""
    before, begin, rest = text.partition(BEGIN)
    _, end, after = rest.partition(END)
    if not begin or not end or BEGIN in after or END in after:
        raise ValueError(f"expected {BEGIN} and {END} once each, in this order")
    return f"{before}{BEGIN}\n\n{block}\n\n{END}{after}"


def table(head: Sequence[str], rows: Iterable[Sequence[str]]) -> str:
    """Return a table of Markdown."""
    lines = [head, ["---"] * len(head), *rows]
    return "\n".join(f"| {' | '.join(cells)} |" for cells in lines)


def number(value: float | None) -> str:
    """Return a number with three significant places, as people write it."""
    if value is None:
        return ""
    if abs(value) >= 1000:
        return f"{value:,.0f}"
    return f"{value:.3g}"


def _made(document: Mapping[str, Any]) -> str:
    """Say when, where and with what."""
    where, versions = document["machine"], document["versions"]
    named = ", ".join(f"{name} {version}" for name, version in versions.items() if version)
    return (
        f"Programme `{document['programme']}`, {document['began']}, {where['cores']} cores of "
        f"{where['processor']}, {where['memory_gib']} GiB; load {document['load']['began']} at "
        f"its beginning, {document['load']['ended']} at its end. Versions: {named}."
    )


def _goals(lines: Iterable[Mapping[str, Any]]) -> str:
    """Return goal and figure side by side."""
    rows = [
        (
            line["what"],
            f"{number(line['figure'])} {line['unit']}" if line["figure"] is not None else "",
            f"{number(line['goal'])} {line['unit']}",
            f"{number(line['stretch'])} {line['unit']}" if line["stretch"] is not None else "",
            _WORDS[line["verdict"]],
            line["detail"],
        )
        for line in lines
    ]
    return table(("what", "figure", "goal", "stretch", "", "detail"), rows)


def _solvers(networks: Sequence[Record]) -> str:
    """Return what everybody took, networks of one size and kind together."""
    rows = []
    for (lanes, kind), records in _grouped(networks).items():
        cells = []
        for name in _SOLVERS:
            part = solve_and_proof if name in {COLD, WARM} else None
            times = [
                seconds([{"seconds": part(a)} for a in r["measured"][name]])
                if part
                else seconds(r["measured"][name])
                for r in records
                if name in r["measured"]
            ]
            found = ratio(records, name, part) if part else None
            shown = number(sum(times) / len(times)) if times else ""
            cells.append(f"{shown} ({found.median:.2f} R)" if found else shown)
        rows.append((f"{lanes:,}", kind, str(len(records)), *cells))
    head = ("lanes", "network", "seeds", *(f"{name}, s" for name in _SOLVERS))
    return table(head, rows) if rows else ""


def _grouped(networks: Sequence[Record]) -> dict[tuple[int, str], list[Record]]:
    """Return networks by lanes and kind; those of NETGEN each by itself."""
    groups: dict[tuple[int, str], list[Record]] = {}
    for record in networks:
        kind = record["name"] if record["kind"] == "NETGEN" else record["kind"]
        groups.setdefault((record["lanes"], kind), []).append(record)
    return groups


def _profiles(document: Mapping[str, Any]) -> str:
    """Return where the time goes: phases of planning, and of a request."""
    parts = []
    for record in document["networks"]:
        pipelines = [name for name in record["measured"] if name.startswith("pipeline")]
        if not pipelines:
            continue
        full = seconds(record["measured"][R])
        profiles = {name: profile(record["measured"][name]) for name in pipelines}
        phases = list(dict.fromkeys(phase for each in profiles.values() for phase in each))
        rows = [
            (
                name.removeprefix("pipeline, "),
                *(number(each.get(phase)) for phase in phases),
                number(seconds(record["measured"][name])),
                f"{seconds(record['measured'][name]) / full:.2f} R",
                number(seconds(record["measured"][name], "added_bytes") / 1e6),
            )
            for name, each in profiles.items()
        ]
        head = ("form", *(f"{phase}, s" for phase in phases), "all, s", "", "memory added, MB")
        parts.append(f"{record['name']}, in one process:\n\n{table(head, rows)}")
    rows = [
        (
            f"{record['lanes']:,} lanes, {record['what']}{'' if as_ == 'served' else f', {as_}'}",
            *(
                number(seconds(answers, key))
                for key in ("accepted_seconds", "planned_seconds", "seconds", "cpu_seconds")
            ),
            f"{seconds(answers) / seconds(record['measured'][R]):.2f} R"
            if R in record["measured"]
            else "",
        )
        for record in document["served"]
        for as_, answers in record["measured"].items()
        if as_ != R
    ]
    if rows:
        head = ("over HTTP", "accepted, s", "planned, s", "fetched, s", "worked, s", "")
        parts.append(table(head, rows))
    return "\n\n".join(parts)


def _growth(growth: Mapping[str, Mapping[str, float | None]]) -> str:
    """Return the exponents."""
    rows = [
        (name, number(each["seconds"]), number(each["added_bytes"]))
        for name, each in growth.items()
        if each["seconds"] is not None
    ]
    if not rows:
        return ""
    head = ("grows with the lanes to the power of", "time", "memory added")
    return table(head, rows)


def _rest(document: Mapping[str, Any]) -> str:
    """Say what is missing, and what is wrong."""
    networks = len(document["networks"]) + len(document["served"])
    equal = f"All costs equal on {networks} networks." if not document["unequal"] else ""
    lines = [
        equal,
        *(f"WRONG: {each}." for each in document["unequal"]),
        *(f"Failed: {each}." for each in document["failed"]),
        *(f"Not run: {each['what']}: {each['because']}." for each in document["not_run"]),
    ]
    return "\n".join(f"* {' '.join(line.split())}" for line in lines if line)
