"""`python -m synthetic_streams` writes a folder, reads faults, refuses nonsense; the package needs numpy only."""

import json
import subprocess
import sys
from pathlib import Path

import pytest

from synthetic_streams import live_start
from synthetic_streams.__main__ import fault_of, main
from synthetic_streams.clock import HOUR

FILES = {"lab.toml", "extract", "controls.csv", "live.csv", "live.ndjson", "live-controls.csv", "live-events.csv", "messages.hl7",
         "faults.json", "truth.json"}  # fmt: skip


def test_a_folder_is_written_with_the_faults_asked_for(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    asked = ["--fault", "calcium@line-1,drift,-1TEa,3,50", "--fault", "tsh@immuno-1,sporadic,2SD,4.5,0.5"]
    assert main([str(tmp_path), "--days", "3", "--volume", "0.3", *asked]) == 0
    assert {path.name for path in tmp_path.iterdir()} == FILES
    first, second = json.loads((tmp_path / "faults.json").read_text(encoding="utf-8"))["faults"]
    assert (first["kind"], first["size"], first["over"], first["onset_us"]) == (
        "drift",
        -1.0,
        50,
        live_start(3) + 3 * HOUR,
    )
    assert (second["kind"], second["unit"], second["share"]) == ("sporadic", "SD", 0.5)
    assert str(tmp_path) in capsys.readouterr().out


@pytest.mark.parametrize(
    "wrong",
    [
        ["--days", "0"],
        ["--volume", "0"],
        ["--seed", "-1"],
        ["--days", "1", "--volume", "0.0001"],
        ["--fault", "sodium@line-2,shift,1TEa"],
        ["--fault", "sodium@line-2,shift,1furlong,3"],
        ["--fault", "sodium@line-9,shift,1TEa,3"],
        ["--fault", "sodium@line-2,shift,1TEa,-3"],
    ],
)
def test_nonsense_is_refused_with_exit_code_2(
    tmp_path: Path, wrong: list[str], capsys: pytest.CaptureFixture[str]
) -> None:
    with pytest.raises(SystemExit) as refused:
        main([str(tmp_path), "--days", "2", *wrong])
    assert refused.value.code == 2
    assert "error:" in capsys.readouterr().err


def test_a_noise_fault_is_read_as_a_factor() -> None:
    fault = fault_of("sodium@line-2,noise,3SD,1", 10)
    assert (fault.kind, fault.size, fault.onset) == ("noise", 3.0, live_start(10) + HOUR)


def test_the_package_loads_numpy_and_the_standard_library_only() -> None:
    code = "import sys, synthetic_streams; print(*{name.partition('.')[0] for name in sys.modules})"
    loaded = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout.split()
    foreign = {name for name in loaded if name not in sys.stdlib_module_names and not name.startswith("_")}
    assert {"numpy", "synthetic_streams"} <= foreign
    assert not foreign & {"pbm", "pandas", "scipy", "pyarrow", "numba", "pydantic"}
