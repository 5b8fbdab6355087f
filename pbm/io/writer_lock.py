"""One writer for a store: a lock on a file beside it, which the operating system releases however its holder ends."""

import fcntl
import os
from pathlib import Path

from pbm.errors import FeedError


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
            raise FeedError(
                f"Another `pbm watch` (process {holder}) writes to {store}. A store has one writer: stop the other one first, or watch "
                "from another folder."
            ) from None
        os.ftruncate(self._file, 0)
        os.pwrite(self._file, f"{os.getpid()}\n".encode(), 0)

    def release(self) -> None:
        """Let others write. The file stays: taking it away could let two writers in."""
        os.close(self._file)
