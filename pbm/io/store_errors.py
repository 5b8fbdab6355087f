"""What a database says when it cannot go on, in one paragraph for the person at the keyboard."""

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from sqlalchemy.exc import DBAPIError

from pbm.errors import FeedError

_KEPT = "What was kept before is safe, and the feed goes on from there when `pbm watch` is started again."
_CAUSES = {
    "SQLITE_FULL": "The disk that holds {path} is full. Free some space.",
    "SQLITE_BUSY": "{path} has been locked by another program for too long. Close the program that writes to it.",
    "SQLITE_LOCKED": "{path} has been locked by another program for too long. Close the program that writes to it.",
    "SQLITE_READONLY": "{path} or its folder may not be written. Give this user the right to write there.",
    "SQLITE_PERM": "{path} or its folder may not be written. Give this user the right to write there.",
    "SQLITE_CANTOPEN": "{path} cannot be opened. Check that its folder exists and that this user may read and write there.",
    "SQLITE_CORRUPT": "{path} is damaged. Move it and the files beside it away, and restore a copy or start afresh.",
    "SQLITE_NOTADB": "{path} is not a store of pbm. Move it away, or name another folder with --lab.",
    "SQLITE_IOERR": "The disk that holds {path} fails to read or write. Check the disk.",
}


@contextmanager
def told(path: Path) -> Iterator[None]:
    """Turn what the database raises into a `FeedError` about the store at `path`."""
    try:
        yield
    except DBAPIError as error:
        name = getattr(error.orig, "sqlite_errorname", "")
        cause = next((text for key, text in _CAUSES.items() if name.startswith(key)), None)
        said = cause.format(path=path) if cause else f"The store {path} cannot go on ({error.orig})."
        raise FeedError(f"{said} {_KEPT}") from error
