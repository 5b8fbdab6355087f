"""Examples in docstrings and in the notebook page are true."""

import doctest
from importlib import import_module
from pathlib import Path
from pkgutil import walk_packages

import pytest

import pbm
import synthetic_streams

TOP = Path(__file__).parents[2]
MODULES = [
    one.name for package in (pbm, synthetic_streams) for one in walk_packages(package.__path__, f"{package.__name__}.")
]


@pytest.mark.parametrize("module", [name for name in MODULES if not name.endswith("__main__")])
def test_the_examples_of_a_module_are_true(module: str):
    assert doctest.testmod(import_module(module)).failed == 0


def test_the_examples_of_the_notebook_page_are_true():
    found = doctest.testfile(str(TOP / "docs" / "ideas" / "notebook.md"), module_relative=False)
    assert found.attempted > 20
    assert found.failed == 0
