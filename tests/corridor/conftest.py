"""Laboratories that several corridor tests walk through, each made once."""

from pathlib import Path

import pytest
from typer.testing import CliRunner, Result

from pbm.commands.main import app
from synthetic_streams import write_laboratory
from tests.corridor.real_extracts import write_hdl, write_light_chain_study


def run(*arguments: str | Path) -> Result:
    """Run `pbm` in this process."""
    return CliRunner().invoke(app, [str(a) for a in arguments])


def done(*arguments: str | Path) -> str:
    """Run `pbm`, which must succeed; what it printed."""
    result = run(*arguments)
    assert result.exit_code == 0, f"{result.output}\n{result.exception!r}"
    return result.stdout


@pytest.fixture(scope="session")
def hdl(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """161,259 real HDL-cholesterol results, taken in and tuned."""
    folder = tmp_path_factory.mktemp("hdl")
    write_hdl(folder)
    done("intake", folder / "hdl.csv", "--lab", folder)
    done("tune", "--quick", "--lab", folder, "--workers", "1")
    return folder


@pytest.fixture(scope="session")
def light_chain_study(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """7,874 residents' creatinine and kappa light chains, two results a day, taken in and tuned."""
    folder = tmp_path_factory.mktemp("flchain")
    write_light_chain_study(folder)
    done("intake", folder / "flchain.csv", "--lab", folder)
    done("tune", "--quick", "--lab", folder, "--workers", "1")
    return folder


@pytest.fixture(scope="session")
def tern_bay(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Forty-five days of the invented laboratory at half its volume, taken in."""
    folder = tmp_path_factory.mktemp("tern-bay")
    write_laboratory(folder, days=45, volume=0.5, seed=3)
    done("intake", folder / "extract" / "export.csv", "--lab", folder)
    return folder
