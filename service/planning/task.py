"""All that a planning child runs: a checked network in, a proved plan out, as files."""

import time
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

import orjson

from service.network.canonical import canonical_json, digest, network_digest, read_network
from service.network.columns import Network
from service.network.intake_files import INTAKE_FILE, NETWORK_FILE
from service.network.options import Options
from service.planning.documents.amounts import Document
from service.planning.documents.certificate import (
    contradiction_certificate,
    proved_certificate,
)
from service.planning.documents.contradictions import contradiction_reason
from service.planning.documents.plan import Setting, planned, unplanned
from service.planning.documents.priorities import achieved
from service.planning.flow.contraction import Contraction
from service.planning.model.arcs import MoneyArray
from service.planning.model.compile import Compiled, compile_network
from service.planning.model.item_network import ItemNetwork
from service.planning.model.limits import NumbersTooLargeError
from service.planning.outcome import (
    CERTIFICATE_FILE,
    PLAN_FILE,
    WARM_START_FILE,
    FailureReason,
    Outcome,
    State,
)
from service.planning.solution import Solution, solve_all
from service.planning.solve import ItemFlow, solve_item
from service.planning.warm_start import WarmStart, left_by
from service.planning.wide.routes import Route, SiftedRoute, chosen_route
from service.proof.check import Violation, check

Progress = Callable[[str, Mapping[str, int]], None]
Prove = Callable[[Network, Options, Mapping[str, Any], Mapping[str, Any]], tuple[Violation, ...]]

VIOLATIONS_NAMED_MAX = 5

# What callers get back stands in a module of its own, which needs no solver.
__all__ = ["Outcome", "plan"]


def plan(
    input_folder: Path,
    options: Options,
    output_folder: Path,
    *,
    progress: Progress | None = None,
    prove: Prove = check,
) -> Outcome:
    """Plan the network in ``input_folder`` and write plan and certificate to ``output_folder``.

    ``input_folder`` holds ``network.zip`` and ``intake.json`` as the intake wrote them. What is
    neither an answer nor a number out of range is our mistake and passes on as its exception.
    A warm start in ``input_folder`` is taken up, and one is left for the next run where it may
    help; neither shows in a plan. ``prove`` looks at both documents as they were written; what it
    objects to is never a plan.
    """
    clock = _Clock(progress)
    network = read_network(input_folder / NETWORK_FILE)
    intake: Any = orjson.loads((input_folder / INTAKE_FILE).read_bytes())
    setting = Setting(
        network_digest=network_digest(network),
        options_digest=digest(canonical_json(options.to_document())),
        warnings=intake["cautions"],
        set_aside=intake["set_aside"],
    )
    clock.phase("read", lanes=len(network.lanes), order_lines=len(network.demand))
    try:
        compiled = compile_network(network, options)
        arcs = sum(len(own.arcs) for own in compiled.items)
        clock.phase("compiled", items=len(compiled.items), arcs=arcs)
        search = _Search(compiled, WarmStart.read(input_folder / WARM_START_FILE), progress)
        solution, why = solve_all(compiled, search.flow)
    except NumbersTooLargeError as error:
        return clock.outcome("failed", FailureReason.NUMBERS_TOO_LARGE, str(error))
    clock.phase("solved", items=len(solution.flows))
    if why:
        document = unplanned(compiled, contradiction_reason(compiled, why), setting)
        certificate = contradiction_certificate(
            compiled,
            why,
            network_digest=setting.network_digest,
            options_digest=setting.options_digest,
        )
    else:
        document, certificate = _documents(compiled, solution, setting)
    plan_bytes, certificate_bytes = orjson.dumps(document), orjson.dumps(certificate)
    (output_folder / PLAN_FILE).write_bytes(plan_bytes)
    (output_folder / CERTIFICATE_FILE).write_bytes(certificate_bytes)
    clock.phase("written", bytes=len(plan_bytes) + len(certificate_bytes))
    state: State = "no_plan" if why else "planned"
    sifted = search.sifted
    left = left_by(network, sifted, cost_scale=compiled.cost_scale) if sifted else None
    # The proof reads network and documents alone; what planning made would double its memory.
    del compiled, search, sifted, solution, why, document, certificate
    found = prove(network, options, orjson.loads(plan_bytes), orjson.loads(certificate_bytes))
    clock.phase("proved", violations=len(found))
    if found:
        return clock.outcome("failed", FailureReason.PROOF_FAILED, _in_words(found))
    if left is not None:
        left.write(output_folder / WARM_START_FILE)
    return clock.outcome(state, None, None)


class _Search:
    """Chooses the routes of all items, from where the former run ended, and tells the rounds."""

    def __init__(self, compiled: Compiled, former: WarmStart, progress: Progress | None) -> None:
        """Start from ``former``."""
        self._compiled, self._former, self._progress = compiled, former, progress
        self._rounds, self._took_shortlists = 0, False
        self.sifted: list[ItemFlow] = []

    def flow(self, own: ItemNetwork) -> ItemFlow:
        """Return the plan of one item; raises what ``solve_item`` raises."""
        self._took_shortlists = False
        found = solve_item(self._compiled.network, own, front=self._front)
        if self._took_shortlists:
            self.sifted.append(found)
        return found

    def _front(self, own: ItemNetwork, contraction: Contraction, weighted: MoneyArray) -> Route:
        compiled = self._compiled
        start = self._former.by_place(
            compiled.network, own, contraction, weighted, cost_scale=compiled.cost_scale
        )

        def seen(number: int, listed: int, better: int) -> None:
            del number, better  # Rounds are counted over all items, and all lanes are priced.
            self._tell(listed=listed, priced=own.lanes.rows.shape[0])

        route = chosen_route(own, contraction, weighted, start=start, seen=seen)
        self._took_shortlists = isinstance(route, SiftedRoute)
        return route

    def _tell(self, *, listed: int, priced: int) -> None:
        self._rounds += 1
        if self._progress is not None:
            counts = {"round": self._rounds, "listed": listed, "priced": priced}
            self._progress("round", counts)


def _documents(
    compiled: Compiled, solution: Solution, setting: Setting
) -> tuple[Document, Document]:
    """Return plan and certificate."""
    made = planned(compiled, solution, setting)
    shortages = compiled.options.shortages == "allow"
    certificate = proved_certificate(
        compiled,
        solution,
        [achieved(flow, shortages=shortages) for flow in solution.flows],
        total_cost=made.total_cost,
        network_digest=setting.network_digest,
        options_digest=setting.options_digest,
    )
    return made.document, certificate


def _in_words(found: tuple[Violation, ...]) -> str:
    """Return what the proof found, the first few in words."""
    named = "; ".join(
        f"{violation.code} at {violation.place}: {violation.detail}"
        for violation in found[:VIOLATIONS_NAMED_MAX]
    )
    return f"The proof found {len(found)} violations: {named}"


class _Clock:
    """Tells the phases and how long each took."""

    def __init__(self, progress: Progress | None) -> None:
        """Start now."""
        self._progress = progress
        self._since = time.perf_counter()
        self._seconds: dict[str, float] = {}

    def phase(self, name: str, **counts: int) -> None:
        """End a phase."""
        now = time.perf_counter()
        self._seconds[name] = round(now - self._since, 6)
        self._since = now
        if self._progress is not None:
            self._progress(name, counts)

    def outcome(self, state: State, reason: FailureReason | None, detail: str | None) -> Outcome:
        """Return how the task ended."""
        return Outcome(state=state, reason=reason, detail=detail, seconds=dict(self._seconds))
