"""Files and folders that appear whole or not at all: written beside their place under another name, then renamed."""

import os
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import BinaryIO


def replace_file(path: Path, content: bytes) -> None:
    """Write a file so that a reader, a power cut or Ctrl-C meets either the old content or the new, never a part.

    Parameters
    ----------
    path
        The file; its folder must exist.
    content
        All its bytes.
    """
    with replacing(path) as file:
        file.write(content)


@contextmanager
def replacing(path: Path) -> Iterator[BinaryIO]:
    """The same for content that is written piece by piece: the file appears when the context ends, unless by an error."""
    handle, name = tempfile.mkstemp(dir=path.parent, prefix=f".{path.name}.")
    made = Path(name)
    try:
        with os.fdopen(handle, "wb") as file:
            yield file
            file.flush()
            os.fsync(file.fileno())
        made.chmod(path.stat().st_mode & 0o777 if path.exists() else 0o666 & ~_umask())
        made.replace(path)
    except BaseException:
        made.unlink(missing_ok=True)
        raise


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask
