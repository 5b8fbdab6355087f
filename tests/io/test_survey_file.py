"""`survey.json`: the record and nothing else, every number finite, the same bytes each time."""

import json
from pathlib import Path

from pbm.io.survey_file import write_survey
from pbm.records.survey import Survey
from tests.stages.test_survey import sodium, surveyed


def survey() -> Survey:
    return Survey(
        made_by="pbm 0",
        laboratory="Tern Bay",
        seed=1,
        history_sha256="h",
        lab_sha256="l",
        streams=(surveyed(sodium(3000)),),
    )


def test_what_is_written_is_the_record_and_is_read_back_as_it_was(tmp_path: Path):
    path = tmp_path / "survey.json"
    write_survey(path, survey())
    assert Survey.model_validate_json(path.read_bytes(), strict=True) == survey()
    assert json.loads(path.read_text())["version"] == 2


def test_the_same_survey_gives_the_same_bytes(tmp_path: Path):
    written = []
    for name in ("one", "other"):
        write_survey(tmp_path / name, survey())
        written.append((tmp_path / name).read_bytes())
    assert written[0] == written[1]
