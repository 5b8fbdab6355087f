"""The public names of `pbm`: resolved when first used, the same for the type checker, and no cost before."""

import ast
import subprocess
import sys
from pathlib import Path

import pytest

import pbm

SOURCE = Path(pbm.__file__ or "")


def test_importing_pbm_loads_nothing_else_of_it():
    command = [
        sys.executable,
        "-c",
        "import sys, pbm; print([name for name in sys.modules if name.startswith('pbm.') or name == 'numpy'])",
    ]
    assert subprocess.run(command, capture_output=True, text=True, check=True).stdout.strip() == "[]"


@pytest.mark.parametrize("name", pbm.__all__)
def test_every_public_name_is_there(name: str):
    assert getattr(pbm, name) is not None
    assert name in dir(pbm)


def test_an_unknown_name_is_an_attribute_error():
    with pytest.raises(AttributeError, match="no attribute 'nonsense'"):
        pbm.nonsense  # noqa: B018


def test_the_type_checker_sees_the_same_names_in_the_same_places():
    (block,) = (node for node in ast.parse(SOURCE.read_text(encoding="utf-8")).body if isinstance(node, ast.If))
    seen = {alias.name: node.module for node in block.body if isinstance(node, ast.ImportFrom) for alias in node.names}
    resolved = {name: module for module, names in pbm._HOME.items() for name in names}
    assert seen == resolved
    assert {*seen, "__version__"} == set(pbm.__all__)
