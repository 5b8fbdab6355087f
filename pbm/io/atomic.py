"""Files and folders that appear whole or not at all: written beside their place under another name, then renamed."""

import os
import tempfile
from pathlib import Path


def replace_file(path: Path, content: bytes) -> None:
    """Write a file so that a reader, a power cut or Ctrl-C meets either the old content or the new, never a part.

    Parameters
    ----------
    path
        The file; its folder must exist.
    content
        All its bytes.
    """
    handle, name = tempfile.mkstemp(dir=path.parent, prefix=f".{path.name}.")
    made = Path(name)
    try:
        with os.fdopen(handle, "wb") as file:
            file.write(content)
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
