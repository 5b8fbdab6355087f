"""`watch.key`: the key of the tokens that stand for patients on the live feed.

It is kept beside the store, not in it, so that a copy of the store alone does not lead back to anybody.
"""

import os
import secrets
from pathlib import Path

from pbm.errors import FeedError

_BYTES = 32


def patient_key(path: Path) -> bytes:
    """The key; made, for its owner's eyes only, if there is none.

    Raises
    ------
    FeedError
        If it can be neither read nor made, or is not a key.
    """
    try:
        if not path.exists():
            _make(path)
        key = path.read_bytes()
    except OSError as error:
        raise FeedError(f"{path}, the key of the tokens for patients, cannot be used: {error.strerror}.") from None
    if len(key) != _BYTES:
        raise FeedError(
            f"{path} is not a key of {_BYTES} bytes. Restore it from a copy, or delete it: then patients seen before are not known again."
        )
    return key


def _make(path: Path) -> None:
    part = path.with_name(f".{path.name}.{os.getpid()}")
    handle = os.open(part, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o600)
    with os.fdopen(handle, "wb") as file:
        file.write(secrets.token_bytes(_BYTES))
        file.flush()
        os.fsync(file.fileno())
    part.replace(path)
