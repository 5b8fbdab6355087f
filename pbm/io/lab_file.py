"""`lab.toml` -> the laboratory; every mistake in it is told at once, by file and key."""

import hashlib
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from pbm.errors import LabError
from pbm.io.mistakes import read_written, written_bytes
from pbm.records.laboratory import Lab, spelling_clashes


def read_lab(path: Path) -> Lab:
    """Read `lab.toml`.

    Raises
    ------
    LabError
        If it is missing, is not UTF-8 or not TOML, or holds mistakes. The text lists all of them, each with its key, what was
        found and what was expected.
    """
    return read_written(path, Lab, LabError, _clashes)


def lab_fingerprint(path: Path) -> str:
    """SHA-256 of the bytes of `lab.toml`, in hexadecimal.

    Raises
    ------
    LabError
        If it cannot be read.
    """
    return hashlib.sha256(written_bytes(path, LabError)).hexdigest()


def _clashes(data: dict[str, Any]) -> Iterator[str]:
    analytes = data.get("analytes")
    tables = {key: one for key, one in analytes.items() if isinstance(one, dict)} if isinstance(analytes, dict) else {}
    lists = {key: one.get("names") for key, one in tables.items()}
    spelt = {
        key: [name for name in names if isinstance(name, str)] if isinstance(names, list) else []
        for key, names in lists.items()
    }
    return spelling_clashes(spelt)
