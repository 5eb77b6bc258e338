"""The composition root: settings, then store, engine, use cases and doors; entry point ``main``.

Whatever only some commands need is imported inside the function that needs it: ``solve``, ``check``
and ``verify`` must run where there is no database, and start without loading one.
"""

import contextlib
import signal
import sys
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING

from service.doors.command_line.backing import Audit, Backing, NotReadyError, OnProgress
from service.doors.command_line.commands import run_command
from service.doors.command_line.ending import Exit, tell
from service.settings import Settings, SettingsError, read_settings
from service.telemetry import configure_logs

if TYPE_CHECKING:
    from service.engine.local import LocalEngine
    from service.engine.tasks import EvidenceChildren, IntakeChildren
    from service.network.intake import IntakeReport
    from service.network.options import Options
    from service.planning.outcome import Outcome
    from service.runs.ports import ExecutorLock, Store
    from service.runs.use_cases import Application
    from service.store.database import Database


def main() -> None:
    """Run the command that the arguments of this process name, and exit with its code."""
    try:
        settings = read_settings()
    except SettingsError as error:
        tell(f"lanewright: a setting cannot be used\n{error}")
        sys.exit(Exit.BAD_INPUT)
    # SIGTERM ends like Ctrl-C, from inside: with time to end children and to clear up.
    signal.signal(signal.SIGTERM, signal.default_int_handler)
    # A command talks to a person: its log is for what went wrong. ``serve`` says more.
    configure_logs("warning")
    sys.exit(run_command(sys.argv[1:], Work(settings).backing()))


class Work:
    """The work behind the commands; nothing is opened or started before a command asks for it."""

    def __init__(self, settings: Settings) -> None:
        """Work as ``settings`` say."""
        self._settings = settings

    def backing(self) -> Backing:
        """Return the work in the form that the command line takes."""
        return Backing(
            intake=self.intake,
            plan=self.plan,
            application=lambda: working_application(self._settings),
            serve=self.serve,
            migrate=self.migrate,
            audit=self.audit,
            address=lambda: address(self._settings.host, self._settings.port),
        )

    def intake(
        self,
        spool: Path,
        folder: Path,
        *,
        options: "Options",
        media_type: str,
        content_encoding: str | None,
    ) -> "IntakeReport":
        """Check a network in a child that is started for it."""
        from service.engine.one_task import do_one_task  # noqa: PLC0415 - see the module
        from service.engine.tasks import intake_task, read_report  # noqa: PLC0415 - see the module

        task = intake_task(
            spool,
            folder,
            options=options,
            media_type=media_type,
            content_encoding=content_encoding,
            limits=intake_limits(self._settings),
        )
        answer = do_one_task(
            "intake",
            task,
            seconds=self._settings.intake_seconds_max,
            memory_bytes=self._settings.intake_memory_bytes_max,
        )
        return read_report(answer, folder)

    def plan(
        self, source: Path, target: Path, *, options: "Options", on_progress: OnProgress
    ) -> "Outcome":
        """Plan a checked network in a child that is started for it.

        Raises ``PlanTooLarge`` when that cannot fit into the memory that it may use.
        """
        import orjson  # noqa: PLC0415 - see the module

        from service.engine.one_task import do_one_task  # noqa: PLC0415 - see the module
        from service.engine.tasks import plan_task, read_outcome  # noqa: PLC0415 - see the module
        from service.network.intake_files import INTAKE_FILE  # noqa: PLC0415 - see the module
        from service.planning.memory import (  # noqa: PLC0415 - see the module
            estimated_peak_bytes,
            limit_bytes,
        )
        from service.runs.faults import PlanTooLarge  # noqa: PLC0415 - see the module

        allowed = self._settings.plan_memory_bytes_max
        workload = orjson.loads((source / INTAKE_FILE).read_bytes())["workload"]
        estimated = estimated_peak_bytes(workload)
        if estimated > allowed:
            raise PlanTooLarge(estimated_bytes=estimated, allowed_bytes=allowed)
        answer = do_one_task(
            "plan",
            plan_task(source, target, options=options),
            seconds=options.deadline_seconds,
            memory_bytes=limit_bytes(estimated, allowed=allowed, held=0),
            on_progress=on_progress,
        )
        return read_outcome(answer)

    def serve(self, *, port: int | None) -> None:
        """Serve until SIGINT or SIGTERM, then let go of everything in order."""
        from service.doors.http.app import create_app  # noqa: PLC0415 - see the module
        from service.doors.http.server import http_server, listen  # noqa: PLC0415 - see the module

        settings = self._settings
        configure_logs(settings.log_level)
        wanted = settings.port if port is None else port
        try:
            listening = listen(settings.host, wanted)
        except OSError as error:
            detail = f"{address(settings.host, wanted)} cannot be listened on: {error.strerror}"
            raise NotReadyError(detail) from error
        with (
            contextlib.suppress(KeyboardInterrupt),
            listening,
            working_application(settings) as application,
        ):
            server = http_server(create_app(application, settings))
            where = address(settings.host, listening.getsockname()[1])
            tell(f"lanewright: serving at {where}, documented at {where}/docs; Ctrl-C ends it")
            server.run(sockets=[listening])

    def migrate(self) -> list[str]:
        """Bring the database up to date; return what was applied."""
        with _opened_database(self._settings) as database:
            return _migrated(database)

    def audit(self) -> Audit:
        """Audit the store, which must be there: an audit makes no database."""
        from service.store.audit import audit  # noqa: PLC0415 - see the module
        from service.store.database import (  # noqa: PLC0415 - see the module
            DatabaseRefused,
            database_url,
            sqlite_file,
        )

        url = self._settings.database_url
        try:
            file = sqlite_file(database_url(url))
        except DatabaseRefused as error:
            raise NotReadyError(str(error)) from error
        if file is not None and not file.exists():
            problem = {"code": "unreadable", "place": str(file), "detail": "There is no such file."}
            return Audit(verdict="unreadable", problems=(problem,))
        found = audit(url)
        return Audit(
            verdict=found.verdict,
            problems=tuple(problem.to_document() for problem in found.problems),
        )


@contextmanager
def working_application(settings: Settings) -> Iterator["Application"]:
    """Open the store, run the engine while the block lasts, let go of both in order.

    An SQLite file is brought up to date first: it belongs to this process alone. Raises
    ``NotReadyError`` when the database cannot be used or another process executes its runs.
    """
    from service.runs.application import application  # noqa: PLC0415 - see the module
    from service.store.sql_store import SqlStore, SystemClock  # noqa: PLC0415 - see the module

    with _opened_database(settings) as database, contextlib.ExitStack() as stack:
        lock = _executor_lock(settings, database)
        stack.callback(lock.release)
        if database.is_sqlite:
            _migrated(database)
        store = SqlStore(
            database, SystemClock(), warm_start_bytes_max=settings.warm_start_bytes_max
        )
        missing = store.missing()
        if missing:
            raise NotReadyError("; ".join(missing))
        intake, engine = _engine(settings, store)
        stack.callback(intake.close)
        pack = _packing(settings)
        stack.callback(pack.close)
        stack.callback(engine.stop)
        engine.start(lock)
        yield application(
            store=store,
            dispatcher=engine,
            intake=intake,
            pack=pack,
            plan_memory_bytes_max=settings.plan_memory_bytes_max,
            engine_missing=lambda: [] if engine.working() else ["engine: it has stopped"],
        )


def _engine(settings: Settings, store: "Store") -> tuple["IntakeChildren", "LocalEngine"]:
    """Return the children that check and the engine that plans, neither of them started."""
    from service.engine.children import Nursery  # noqa: PLC0415 - see the module
    from service.engine.local import LocalEngine  # noqa: PLC0415 - likewise
    from service.engine.tasks import IntakeChildren, PlanningChildren  # noqa: PLC0415 - likewise
    from service.runs.execute import Execute  # noqa: PLC0415 - likewise
    from service.runs.recover import Recover  # noqa: PLC0415 - likewise
    from service.runs.sweep import Sweep  # noqa: PLC0415 - likewise
    from service.runs.watch import Watch  # noqa: PLC0415 - likewise

    intake = IntakeChildren(
        Nursery("intake", spares=settings.intake_slots),
        seconds=settings.intake_seconds_max,
        memory_bytes=settings.intake_memory_bytes_max,
        limits=intake_limits(settings),
    )
    planner = PlanningChildren(Nursery("plan"), memory_bytes=settings.plan_memory_bytes_max)
    engine = LocalEngine(
        execute=Execute(
            store=store,
            planner=planner,
            scratch=settings.data / "scratch",
            lease_seconds=settings.lease_seconds,
            crashes_max=settings.crashes_max,
        ),
        sweep=Sweep(store=store, crashes_max=settings.crashes_max),
        watch=Watch(store=store, lease_seconds=settings.lease_seconds),
        recover=Recover(store=store),
        planner=planner,
        poll_seconds=settings.poll_seconds,
    )
    return intake, engine


def _packing(settings: Settings) -> "EvidenceChildren":
    """Return the children that pack evidence; asked for seldom, so that none is kept warm."""
    from service.engine.children import Nursery  # noqa: PLC0415 - see the module
    from service.engine.tasks import EvidenceChildren  # noqa: PLC0415 - likewise

    return EvidenceChildren(
        Nursery("evidence", spares=0),
        seconds=settings.intake_seconds_max,
        memory_bytes=settings.plan_memory_bytes_max,
    )


@contextmanager
def _opened_database(settings: Settings) -> Iterator["Database"]:
    """Open the database of the settings, close it after the block."""
    from service.store.database import DatabaseRefused, open_database  # noqa: PLC0415 - see above

    # Nobody else on this machine needs to read what lies there.
    settings.data.mkdir(mode=0o700, parents=True, exist_ok=True)
    try:
        database = open_database(settings.database_url)
    except DatabaseRefused as error:
        raise NotReadyError(str(error)) from error
    try:
        yield database
    finally:
        database.close()


def _migrated(database: "Database") -> list[str]:
    """Bring an open database up to date; return what was applied."""
    from service.runs.faults import StoreUnavailable  # noqa: PLC0415 - see the module
    from service.store.migrate import MigrationBroken, migrate_database  # noqa: PLC0415 - likewise

    try:
        return migrate_database(database)
    except MigrationBroken as error:
        raise NotReadyError(f"the database is not what it should be: {error}") from error
    except StoreUnavailable as error:
        raise NotReadyError(f"the database cannot be reached: {error}") from error


def _executor_lock(settings: Settings, database: "Database") -> "ExecutorLock":
    """Return the lock that lets this process alone execute the runs of ``database``."""
    from service.engine.lock import EngineLock  # noqa: PLC0415 - see the module
    from service.runs.faults import EngineLocked, StoreUnavailable  # noqa: PLC0415 - likewise
    from service.store.database import database_url, sqlite_file  # noqa: PLC0415 - likewise
    from service.store.executor_lock import DatabaseExecutorLock  # noqa: PLC0415 - likewise

    file = sqlite_file(database_url(settings.database_url))
    other = "LANEWRIGHT_DATABASE to another database"
    try:
        if file is None:
            return DatabaseExecutorLock(database)
        other = "LANEWRIGHT_DATA to another folder"
        return EngineLock(file.with_name(file.name + ".engine"))
    except EngineLocked as error:
        raise NotReadyError(f"{error}. Stop it, or set {other}.") from error
    except StoreUnavailable as error:
        raise NotReadyError(f"the database cannot be reached: {error}") from error


def intake_limits(settings: Settings) -> Mapping[str, int]:
    """Return the limits of the input check as they travel to a child."""
    return {
        "unpacked_bytes_max": settings.body_unpacked_bytes_max,
        "nesting_max": settings.nesting_max,
    }


def address(host: str, port: int) -> str:
    """Return where the service answers; an IPv6 address stands in brackets (RFC 3986 3.2.2)."""
    return f"http://[{host}]:{port}" if ":" in host else f"http://{host}:{port}"
