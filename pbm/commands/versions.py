"""Versions of Python and of the libraries that decide figures, for the record of a plan."""

import platform
from importlib.metadata import version

DECIDING = ("numpy", "scipy", "numba")


def versions() -> dict[str, str]:
    """Name -> version."""
    return {"python": platform.python_version()} | {name: version(name) for name in DECIDING}
