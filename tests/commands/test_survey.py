"""`pbm survey`: one screen, two files that do not depend on the workers, and words for what a history may hold."""

import json
from pathlib import Path

import pytest
from typer.testing import CliRunner, Result

from pbm.commands.main import app, main
from pbm.records.survey import Survey
from synthetic_streams import write_laboratory


def run(*arguments: str | Path) -> Result:
    return CliRunner().invoke(app, [str(one) for one in arguments])


def done(*arguments: str | Path) -> str:
    result = run(*arguments)
    assert result.exit_code == 0, f"{result.output}\n{result.exception!r}"
    return result.stdout


@pytest.fixture(scope="module")
def tern_bay(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Twenty-two days of the invented laboratory at its full volume, taken in."""
    folder = tmp_path_factory.mktemp("tern-bay")
    write_laboratory(folder, days=22, volume=1.0, seed=1)
    done("intake", folder / "extract" / "export.csv", "--lab", folder)
    return folder


STREAMS = ("sodium@line-1", "tsh@immuno-1", "glucose@line-1")


def test_sodium_is_useful_and_thyrotropin_is_not_with_the_reason_in_words_on_one_screen(tern_bay: Path):
    told = done("survey", *STREAMS, "--lab", tern_bay, "--workers", "1")
    rows = {line.split()[0]: line for line in told.splitlines() if line.startswith(STREAMS)}
    assert " useful " in rows["sodium@line-1"]
    assert "tsh@immuno-1: not useful here: needs about" in " ".join(told.split())
    assert "results to see 1 TEa" in told
    assert all(len(line) <= 120 for line in told.splitlines() if not line.startswith("Report"))
    assert len(told.splitlines()) <= 40
    assert told.splitlines()[-1] == f"Report: {tern_bay / 'reports' / 'survey.html'}"


def test_both_files_are_the_same_whatever_the_number_of_workers(tern_bay: Path):
    written = []
    for workers in ("1", "2"):
        done("survey", *STREAMS[:2], "--lab", tern_bay, "--workers", workers)
        written.append([(tern_bay / "reports" / name).read_bytes() for name in ("survey.json", "survey.html")])
    assert written[0] == written[1]
    found = Survey.model_validate_json(written[0][0], strict=True)
    assert [stream.stream for stream in found.streams] == sorted(STREAMS[:2])
    repeats = found.streams[1].repeats
    assert repeats is not None
    assert repeats.known == 1.0


def test_json_is_what_the_file_holds(tern_bay: Path):
    printed = json.loads(done("survey", "tsh@immuno-1", "--lab", tern_bay, "--json"))
    assert printed == json.loads((tern_bay / "reports" / "survey.json").read_text())


def test_a_history_of_bad_streams_is_told_in_words(tmp_path: Path):
    lab = '[laboratory]\nname = "T"\ntimezone = "UTC"\n[extract]\ntime = "t"\nanalyte = "a"\nvalue = "v"\n' + "".join(
        f'[analytes.{name}]\nunit = "x"\nstep = 1\nallowable_error = {{ percent = 10 }}\nanalytic_sd = {{ cv_percent = 2 }}\n'
        for name in ("same", "few", "censored", "negative")
    )
    (tmp_path / "lab.toml").write_text(lab)
    rows = [f"2031-01-{1 + i // 60:02}T{i % 24:02}:{i % 60:02}:00,same,7" for i in range(1500)]
    rows += [f"2031-01-{1 + i // 60:02}T{i % 24:02}:{i % 60:02}:00,censored,<{5 + i % 2}" for i in range(1500)]
    rows += [f"2031-01-{1 + i // 60:02}T{i % 24:02}:{i % 60:02}:00,negative,{i % 11 - 5}" for i in range(1500)]
    rows += [f"2031-01-01T00:{i:02}:00,few,{i}" for i in range(10)]
    (tmp_path / "x.csv").write_text("\n".join(["t,a,v", *rows, ""]))
    done("intake", tmp_path / "x.csv", "--lab", tmp_path)
    told = " ".join(done("survey", "--lab", tmp_path, "--workers", "1").split())
    assert "same@pooled: not useful here: all results are 7 x" in told
    assert "100% of the results are censored" in told
    assert "10 results on 1 day are too few" in told
    assert "Traceback" not in told


def test_an_analyte_gone_from_lab_toml_fails_alone_and_says_so(tern_bay: Path, tmp_path: Path):
    (tmp_path / "history").symlink_to(tern_bay / "history")
    text = (tern_bay / "lab.toml").read_text()
    begin, end = text.index("[analytes.tsh]"), text.index("[analytes.haemoglobin]")
    (tmp_path / "lab.toml").write_text(text[:begin] + text[end:])
    result = run("survey", "tsh@immuno-1", "glucose@line-1", "--lab", tmp_path, "--workers", "1")
    assert result.exit_code == 2
    assert "lab.toml has no analyte tsh" in result.stderr
    assert "glucose@line-1" in result.stdout


def test_without_a_history_it_says_what_to_do(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
):
    (tmp_path / "lab.toml").write_text(
        '[laboratory]\nname = "T"\ntimezone = "UTC"\n[extract]\ntime = "t"\nanalyte = "a"\nvalue = "v"\n'
        '[analytes.x]\nunit = "x"\nstep = 1\nallowable_error = { absolute = 1 }\nanalytic_sd = { absolute = 1 }\n'
    )
    monkeypatch.setattr("sys.argv", ["pbm", "survey", "--lab", str(tmp_path)])
    with pytest.raises(SystemExit) as left:
        main()
    assert left.value.code == 2
    assert "pbm intake" in capsys.readouterr().err
