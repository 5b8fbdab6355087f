"""`reports/survey.json`: a survey as JSON, keys in the record's order, floats exact, written whole or not at all."""

from pathlib import Path

from pbm.io.atomic import replace_file
from pbm.records.survey import Survey


def write_survey(path: Path, survey: Survey) -> None:
    """Write `survey.json`; the same survey gives the same bytes."""
    replace_file(path, f"{survey.model_dump_json(indent=1)}\n".encode())
