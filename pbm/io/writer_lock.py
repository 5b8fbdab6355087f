"""One writer for a store: a lock that is released however its holder ends.

A file of SQLite has a lock file beside it, which the operating system watches; a PostgreSQL database an advisory lock, which its server
releases when the connection ends.
"""

import fcntl
import os
from contextlib import suppress
from pathlib import Path
from typing import Any

from pbm.errors import FeedError

_ADVISORY = 0x70626D5F77617463  # "pbm_watc"
_HOLDER = """
    SELECT application_name FROM pg_locks JOIN pg_stat_activity USING (pid)
    WHERE locktype = 'advisory' AND granted AND classid = %s AND objid = %s
    AND pg_locks.database = (SELECT oid FROM pg_database WHERE datname = current_database())
"""


class WriterLock:
    """Holds the right to write to a store until it is released or the process ends.

    Raises
    ------
    FeedError
        If another process holds it, or the file cannot be made.
    """

    def __init__(self, store: Path) -> None:
        path = store.with_name(f"{store.name}.lock")
        try:
            self._file = os.open(path, os.O_RDWR | os.O_CREAT, 0o666)
        except OSError as error:
            raise FeedError(
                f"{path} cannot be written ({error.strerror}). The folder must exist and this user must be allowed to write there."
            ) from None
        try:
            fcntl.flock(self._file, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            holder = os.pread(self._file, 20, 0).decode("ascii", "replace").strip() or "unknown"
            os.close(self._file)
            raise _another(f"process {holder}", str(store)) from None
        with suppress(OSError):  # on a full disk it is not told who holds it, and that is all
            os.ftruncate(self._file, 0)
            os.pwrite(self._file, f"{os.getpid()}\n".encode(), 0)

    def release(self) -> None:
        """Let others write. The file stays: taking it away could let two writers in."""
        os.close(self._file)


def hold_advisory_lock(connection: Any, place: str) -> None:
    """Take the right to write to the database of a psycopg connection; it lasts as long as the connection, and is never taken over.

    Raises
    ------
    FeedError
        If another connection holds it.
    """
    if connection.execute("SELECT pg_try_advisory_lock(%s)", [_ADVISORY]).fetchone()[0]:
        return
    holder = connection.execute(_HOLDER, [_ADVISORY >> 32, _ADVISORY & 0xFFFFFFFF]).fetchone()
    raise _another(holder[0] if holder else "unknown", place)


def _another(holder: str, place: str) -> FeedError:
    return FeedError(
        f"Another `pbm watch` ({holder}) writes to {place}. A store has one writer: stop the other one first, or watch into another store."
    )
