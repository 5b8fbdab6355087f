"""A command loads what it needs: help and the live watch start without the libraries that fit, draw and compile."""

import subprocess
import sys
from pathlib import Path

import pytest

from tests.house.small_laboratory import write_small_laboratory

SLOW = ("statsmodels", "matplotlib", "numba", "river")
RUN = f"""
import sys
from pbm.commands.main import main
try:
    main()
except SystemExit as left:
    assert not left.code, left.code
print([name for name in {SLOW} if name in sys.modules], file=sys.stderr)
"""


def fresh(*arguments: str, at: Path | None = None) -> subprocess.CompletedProcess[str]:
    """Run `pbm` in an interpreter of its own; the last line on stderr lists the slow libraries it loaded."""
    return subprocess.run([sys.executable, "-c", RUN, *arguments], cwd=at, capture_output=True, text=True, check=False)


@pytest.mark.parametrize("arguments", [("--help",), ("--version",), ("watch", "--help"), ("tune", "--help")])
def test_help_loads_no_slow_library(arguments: tuple[str, ...]):
    ran = fresh(*arguments)
    assert ran.returncode == 0, ran.stderr
    assert ran.stderr.splitlines()[-1] == "[]"


def test_help_loads_no_array_library_either():
    ran = subprocess.run(
        [
            sys.executable,
            "-c",
            "import sys, pbm.commands.main; print([n for n in ('numpy', 'pyarrow', 'sqlalchemy') if n in sys.modules])",
        ],
        capture_output=True,
        text=True,
        check=True,
    )
    assert ran.stdout.strip() == "[]"


def test_the_live_watch_raises_an_alarm_without_a_slow_library(tmp_path: Path):
    write_small_laboratory(tmp_path)
    ran = fresh("watch", "--from", "live.csv", "--once", at=tmp_path)
    assert ran.returncode == 0, ran.stderr
    assert "sodium line-2  HIGH  EWMA" in ran.stdout
    assert ran.stderr.splitlines()[-1] == "[]"
