"""Versions of Python and of the libraries that decide figures, for the record of a plan; and of this code itself."""

import hashlib
import platform
from functools import cache
from importlib.metadata import version
from pathlib import Path

import pbm

DECIDING = ("numpy", "scipy", "numba")
# More threads inside a linear algebra library add up in another order and change last bits: one, wherever figures are made.
ONE_THREAD = dict.fromkeys(("OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"), "1")


def versions() -> dict[str, str]:
    """Name -> version."""
    return {"python": platform.python_version()} | {name: version(name) for name in DECIDING}


def origin() -> dict[str, str]:
    """Name -> version of everything whose change may change a figure, with the SHA-256 of this code: a version number outlives edits."""
    return {"pbm": pbm.__version__, "pbm's code": _code_sha256(), "statsmodels": version("statsmodels"), **versions()}


@cache
def _code_sha256() -> str:
    total = hashlib.sha256()
    top = Path(pbm.__file__).parent
    for path in sorted(top.rglob("*.py")):
        total.update(f"{path.relative_to(top).as_posix()}\n".encode() + path.read_bytes())
    return total.hexdigest()
