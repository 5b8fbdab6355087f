"""A PostgreSQL server for tests, from the packages of the system: reached through a socket in its own folder, thrown away afterwards."""

import os
import pwd
import shutil
import subprocess
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from itertools import count
from pathlib import Path

import pytest

REQUIRED = "PBM_TEST_POSTGRESQL"  # set where a missing server is a mistake: in CI
_PLACES = ("/usr/lib/postgresql", "/usr/local/pgsql", "/opt/homebrew/opt/postgresql")
_USER = "postgres"


class Server:
    """A running server."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self._numbers = count(1)

    def new_database(self, how: str = "") -> str:
        """The address of a new, empty database."""
        name = f"laboratory_{next(self._numbers)}"
        self.execute(f"CREATE DATABASE {name} {how}")
        return self.address(name)

    def address(self, name: str) -> str:
        """The address of a database."""
        return f"postgresql://{user()}@/{name}?host={self.folder}"

    def execute(self, statement: str, name: str = "postgres") -> None:
        """Run a statement outside a transaction."""
        import psycopg

        with psycopg.connect(self.address(name), autocommit=True) as connection:
            connection.execute(statement.encode())


def user() -> str:
    """Who runs the server, which will not run as root."""
    return _USER if os.geteuid() == 0 else pwd.getpwuid(os.geteuid()).pw_name


def why_not() -> str:
    """Why there can be no server here; "" if there can."""
    try:
        import psycopg  # noqa: F401
    except ImportError:
        return "psycopg is not installed (the extra `postgres`)"
    if binaries() is None:
        return "no server of PostgreSQL is installed"
    if os.geteuid() == 0 and not shutil.which("runuser"):
        return "a server of PostgreSQL does not run as root"
    return ""


def binaries() -> Path | None:
    """The folder of the server's programs."""
    found = [path.parent for place in _PLACES for path in Path(place).glob("**/bin/initdb")]
    return max(found, key=_version, default=None)


def _version(programs: Path) -> float:
    version = programs.parent.name
    return float(version) if version.replace(".", "", 1).isdigit() else 0.0


@contextmanager
def running_server() -> Iterator[Server]:
    """A server that runs as long as the context; skips, or fails where `REQUIRED` is set, if there can be none."""
    if reason := why_not():
        (pytest.fail if os.environ.get(REQUIRED) else pytest.skip)(reason)
    # Where the server's user may go, too, and with a name short enough for a socket.
    folder = Path(tempfile.mkdtemp(prefix="pbm-postgresql-", dir="/tmp"))
    data = folder / "data"
    try:
        if os.geteuid() == 0:
            shutil.chown(folder, _USER)
        _run("initdb", "--pgdata", data, "--auth", "trust", "--encoding", "UTF8", "--locale", "C", "--no-sync")
        options = f"-c shared_buffers=16MB -c listen_addresses='' -c unix_socket_directories='{folder}'"
        _run("pg_ctl", "start", "--pgdata", data, "--wait", "--log", folder / "log", "--options", options)
        try:
            yield Server(folder)
        finally:
            _run("pg_ctl", "stop", "--pgdata", data, "--mode", "immediate")
    finally:
        shutil.rmtree(folder, ignore_errors=True)


def _run(program: str, *arguments: str | Path) -> None:
    folder = binaries()
    assert folder is not None
    another = ("runuser", "-u", _USER, "--") if os.geteuid() == 0 else ()
    command = [*another, str(folder / program), *map(str, arguments)]
    # A started server keeps what it is given for its output: a pipe would never end.
    done = subprocess.run(command, check=False, stdin=subprocess.DEVNULL, stdout=subprocess.DEVNULL, cwd="/")
    assert done.returncode == 0, f"{program} failed"
