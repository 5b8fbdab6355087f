"""The history and the live feed are read by the same rules: the same row gives the same result or reason in an extract and live."""

from typing import Any

from hypothesis import given
from hypothesis import strategies as st

from pbm.records.reading import Reading
from pbm.records.result import Result
from pbm.stages.intake import RowReader
from pbm.stages.reading import Reader
from tests.stages.intake.laboratory import KEY, ROW, block, lab

ROLES = ("time", "analyte", "analyser", "value", "unit", "specimen", "ward", "kind", "sex", "age")
WORDS = {
    "time": [
        "2031-03-02 07:14",
        "2031-03-30T00:30",
        "2031-03-02T07:14:05+05:30",
        "2031-02-30",
        "9999-12-31",
        "soon",
        "20310302T071405",
    ],
    "analyte": ["NA", "GLU", "sodium", "na", "X", "test"],
    "analyser": ["line-1", "x" * 61],
    "value": ["138", "<5", "> 219", "≤0,01", "HEM", "80", "79.9", "1e3", "result", "5.5 *"],
    "unit": ["mmol/L", "mmol/l", "mg/dL"],
    "specimen": ["S-2"],
    "ward": ["DIAL"],
    "kind": ["P", "Q"],
    "sex": ["female", "W", "m", "U", "2"],
    "age": ["3 m", "067Y", "12,5", "1970-03-02", "75 and over", "999"],
}
row = st.fixed_dictionaries(
    {role: st.one_of(st.just(ROW[role]), st.sampled_from([*WORDS[role], "", " "])) for role in ROLES}
)


@given(row)
def test_a_row_of_an_extract_and_a_live_reading_agree(cells: dict[str, str]) -> None:
    parsed = RowReader(lab(), KEY).parse(block({**ROW, **cells}))
    live = Reader(lab(), kinds_given=True).read(Reading(**cells, place=2))
    if isinstance(live, Result):
        found: Any = parsed.results.to_pylist()[0]
        assert [str(name) for name, _ in parsed.streams] == [str(live.stream)]
        assert int(found["time"].timestamp()) * 1_000_000 == live.time
        kept = ("value", "censor", "specimen", "ward", "sex", "age")
        assert {name: found[name] for name in kept} == {name: getattr(live, name) for name in kept}
    else:
        assert parsed.left_out["reason"].to_pylist() == [live.reason]
