"""A disk as it should not be: of a few megabytes, which can be filled up; or read-only."""

import os
import shutil
import subprocess
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest


@contextmanager
def small_disk(place: Path, size: str) -> Iterator[Path]:
    """A file system of so many bytes at a folder; skips where none may be made."""
    if os.geteuid() != 0 or not shutil.which("mount"):
        pytest.skip("a small file system is needed, and only root may make one")
    if subprocess.run(
        ["mount", "-t", "tmpfs", "-o", f"size={size}", "tmpfs", place], check=False, capture_output=True
    ).returncode:
        pytest.skip("this computer lets no file system be made")
    try:
        yield place
    finally:
        subprocess.run(["umount", "-l", place], check=True)


def enlarge(place: Path, size: str) -> None:
    """Give the file system another size."""
    subprocess.run(["mount", "-o", f"remount,size={size}", place], check=True)


@contextmanager
def nobody_may_write(folder: Path) -> Iterator[None]:
    """A folder that may be read only; for root, who may everything, as another user."""
    user = os.geteuid()
    if user == 0 and not all(place.stat().st_mode & 0o005 for place in Path(sys.prefix).parents):
        pytest.skip(f"no other user may read {sys.prefix}, where python's libraries are")
    folder.chmod(0o555)
    # The folders above that pytest keeps to root; never one that everybody shares.
    closed = [place for place in folder.parents if user == 0 and not place.stat().st_mode & 0o005]
    for place in closed:
        place.chmod(0o755)
    os.seteuid(user or 65534)
    try:
        yield
    finally:
        os.seteuid(user)
        folder.chmod(0o755)
        for place in closed:
            place.chmod(0o700)
