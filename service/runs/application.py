"""Putting the use cases together, for whoever composes the service."""

from collections.abc import Callable

from service.runs.evidence import Evidence, Pack
from service.runs.ports import Dispatcher, Store
from service.runs.read import Read
from service.runs.submit import Submit
from service.runs.use_cases import Application, IntakeCall


def application(  # noqa: PLR0913 - what the use cases are given from outside, by name
    *,
    store: Store,
    dispatcher: Dispatcher,
    intake: IntakeCall,
    pack: Pack,
    plan_memory_bytes_max: int,
    engine_missing: Callable[[], list[str]],
) -> Application:
    """Return the use cases over ``store``.

    ``intake`` checks networks and ``pack`` packs evidence in a child of the engine's,
    ``engine_missing`` says what keeps the engine from working.
    """
    read = Read(store=store)
    return Application(
        intake=intake,
        submit=Submit(
            store=store, dispatcher=dispatcher, plan_memory_bytes_max=plan_memory_bytes_max
        ),
        run=read.run,
        plan_bytes=read.plan_bytes,
        certificate_bytes=read.certificate_bytes,
        network_bytes=read.network_bytes,
        history=read.history,
        evidence=Evidence(read=read, pack=pack),
        readiness=lambda: [*store.missing(), *engine_missing()],
    )
