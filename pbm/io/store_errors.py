"""What a database says when it cannot go on, in one paragraph for the person at the keyboard."""

from collections.abc import Iterator
from contextlib import contextmanager

from sqlalchemy.exc import DBAPIError, OperationalError

from pbm.errors import FeedError, StoreWaits
from pbm.io.store_place import Place, in_words

_SAFE = "What was kept before is safe."
_KEPT = "What was kept before is safe, and the feed goes on from there when `pbm watch` is started again."
_MAY_NOT_WRITE = "{place} or its folder may not be written. Give this user the right to write there."
_LOCKED = "{place} has been locked by another program for too long. Close the program that writes to it."
_FULL = "The disk that holds {place} is full. Free some space."
_DAMAGED = "{place} is damaged. Move it and the files beside it away, and restore a copy or start afresh."
_REFUSED = (
    "{place} refuses this user: {said}. Give the user the right to create tables in the schema watch and to write them."
)
_UNREACHED = "{place} cannot be reached, or refuses this user: {said}. See that the server runs, and that `store` in lab.toml is right."
# By the name of SQLite's error or PostgreSQL's SQLSTATE, or how it begins.
_CAUSES = {
    "SQLITE_FULL": _FULL,
    "SQLITE_BUSY": _LOCKED,
    "SQLITE_LOCKED": _LOCKED,
    "SQLITE_READONLY": _MAY_NOT_WRITE,
    "SQLITE_PERM": _MAY_NOT_WRITE,
    "SQLITE_CANTOPEN": "{place} cannot be opened. Check that its folder exists and that this user may read and write there.",
    "SQLITE_CORRUPT": _DAMAGED,
    "SQLITE_NOTADB": "{place} is not a store of pbm. Move it away, or name another folder with --lab.",
    "SQLITE_IOERR_SHMSIZE": _FULL,
    "SQLITE_IOERR": "The disk that holds {place} fails to read or write. Check the disk.",
    "53100": _FULL,
    "55P03": _LOCKED,
    "42501": _REFUSED,
    "3F000": _REFUSED,
    "25006": "{place} can only be read (a standby server, or a transaction set to read only). Name the primary server.",
    "57P": "The server of {place} is shutting down or starting. Try again when it runs.",
    "XX00": "{place} is damaged: {said}. Restore a copy of the database or start afresh.",
}
_CAN_WAIT = (_FULL, _LOCKED, _MAY_NOT_WRITE)


@contextmanager
def told(place: Place) -> Iterator[None]:
    """Turn what the database raises into a `FeedError` about the store; into `StoreWaits` where the same may be tried again."""
    try:
        yield
    except DBAPIError as error:
        name = getattr(error.orig, "sqlite_errorname", None) or getattr(error.orig, "sqlstate", None) or ""
        cause = next((text for key, text in _CAUSES.items() if name.startswith(key)), None)
        # The first line only: the others may quote a row.
        said = str(error.orig).partition("\n")[0].rstrip(".")
        cause = cause or (_UNREACHED if isinstance(error, OperationalError) and not name else None)
        words = (cause or "The store {place} cannot go on ({said}).").format(place=in_words(place), said=said)
        if cause in _CAN_WAIT:
            raise StoreWaits(f"{words} {_SAFE}") from error
        raise FeedError(f"{words} {_KEPT}") from error
