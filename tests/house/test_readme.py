"""The README: its two commands are those that CI runs, its lab.toml is taken as it stands, its cautions are there."""

import re
import subprocess
from pathlib import Path

import pytest

from pbm.commands.lab import read_checked_lab
from tests.house.command_lines import fenced
from tests.house.small_laboratory import readme_lab

TOP = Path(__file__).parents[2]
README = (TOP / "README.md").read_text(encoding="utf-8")
CI = (TOP / ".ci" / "run").read_text(encoding="utf-8")
WHOLE_JOB = "# set up and run the whole job on the invented laboratory"
TESTS = "# set up and run the tests"


def extracted(title: str) -> str:
    """What CI takes from the README under a comment line, by its own function."""
    function = re.search(r"^command_under\(\) \{.*?^\}$", CI, re.MULTILINE | re.DOTALL)
    assert function
    command = ["bash", "-c", f'{function[0]}\ncommand_under "$1"', "ci", title]
    return subprocess.run(command, cwd=TOP, capture_output=True, text=True, check=True).stdout


@pytest.mark.parametrize(
    ("title", "does"),
    [
        (WHOLE_JOB, ["python3 -m venv .venv", "pip install .", "pbm demo"]),
        (TESTS, ["python3 -m venv .venv-test", "[test]", "pytest"]),
    ],
)
def test_ci_runs_the_commands_of_the_readme_word_for_word(title: str, does: list[str]):
    (block,) = (block for block in fenced(README, "sh") if block.startswith(title + "\n"))
    assert extracted(title) == block.removeprefix(title + "\n")
    assert all(part in block for part in does)
    assert CI.count(f"as_the_readme_says '{title}'") == 1


def test_each_command_is_one_line_that_stops_at_the_first_failure():
    for title in (WHOLE_JOB, TESTS):
        (line,) = extracted(title).splitlines()
        assert line.count(" && ") == 2


def test_the_readme_opens_with_one_paragraph_on_the_job():
    _, first, second, *_ = README.split("\n\n")
    assert "quality control" in first
    assert not first.startswith(("#", "```"))
    assert second.startswith("```sh\n")


def test_the_lab_file_of_the_readme_is_taken_as_it_stands(tmp_path: Path):
    path = tmp_path / "lab.toml"
    path.write_text(readme_lab(), encoding="utf-8")
    assert list(read_checked_lab(path).analytes) == ["sodium"]


@pytest.mark.parametrize(
    "caution",
    [
        "supplements control materials and never replaces them",
        "laboratory director's decision",
        "TEa, analytic SD and the history given",
        "not a diagnostic device",
    ],
)
def test_the_readme_gives_the_cautions(caution: str):
    assert caution in " ".join(README.split())
