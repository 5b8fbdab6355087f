"""The laboratory's file as commands read it: its own checks, and those that need the methods (control rules)."""

from pathlib import Path

from pbm.errors import LabError
from pbm.io.lab_file import read_lab
from pbm.records.laboratory import Lab


def read_checked_lab(path: Path) -> Lab:
    """Read `lab.toml` and check that its control rules are understood.

    Raises
    ------
    LabError
        With every mistake.
    """
    from pbm.methods.control_rules import parse_rule

    lab = read_lab(path)
    mistakes = []
    given = {"controls.rules": lab.controls.rules or ()}
    given |= {f"analytes.{key}.controls.rules": analyte.controls.rules or () for key, analyte in lab.analytes.items()}
    for key, rules in given.items():
        for place, rule in enumerate(rules):
            try:
                parse_rule(rule)
            except ValueError as error:
                mistakes.append(f"{key}[{place}]: {error}")
    if mistakes:
        raise LabError(f"{path} has {len(mistakes)} mistake{'s' * (len(mistakes) > 1)}:\n  " + "\n  ".join(mistakes))
    return lab
