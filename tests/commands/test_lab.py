"""Control rules of lab.toml are checked where commands read it."""

from pathlib import Path

import pytest

from pbm.commands.lab import read_checked_lab
from pbm.errors import LabError
from tests.commands.test_tune import LAB


def test_every_unknown_rule_is_told_with_its_place(tmp_path: Path) -> None:
    lab = tmp_path / "lab.toml"
    lab.write_text(
        LAB.replace('["1-3s", "2-2s", "R-4s"]', '["1-3s", "3-wide"]') + 'controls.rules = ["1-2s", "never", "R-x"]\n'
    )
    with pytest.raises(LabError) as caught:
        read_checked_lab(lab)
    text = str(caught.value)
    assert "3 mistakes" in text
    for place in ("controls.rules[1]", "analytes.sodium.controls.rules[1]", "analytes.sodium.controls.rules[2]"):
        assert place in text


def test_a_laboratory_without_mistakes_is_read(tmp_path: Path) -> None:
    lab = tmp_path / "lab.toml"
    lab.write_text(LAB)
    assert read_checked_lab(lab).controls.rules == ("1-3s", "2-2s", "R-4s")
