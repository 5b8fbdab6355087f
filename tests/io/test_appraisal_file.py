"""appraisal.json holds an appraisal exactly, the same bytes each time, and a file that is not one is told in one paragraph."""

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pydantic import ValidationError

from pbm.errors import InputError
from pbm.io.appraisal_file import differences, read_appraisal, write_appraisal
from pbm.records.appraisal import Appraisal
from pbm.records.figures import Figure
from tests.io.report.sample import HOSTILE, SODIUM, THREE, appraisal, hostile


@pytest.mark.parametrize("given", [THREE, appraisal(), hostile()])
def test_an_appraisal_comes_back_equal(tmp_path: Path, given: Appraisal) -> None:
    write_appraisal(tmp_path / "appraisal.json", given)
    assert read_appraisal(tmp_path / "appraisal.json") == given


def test_the_same_appraisal_gives_the_same_bytes(tmp_path: Path) -> None:
    for name in ("one.json", "two.json"):
        write_appraisal(tmp_path / name, THREE.model_copy(deep=True))
    assert (tmp_path / "one.json").read_bytes() == (tmp_path / "two.json").read_bytes()


def test_what_was_read_and_written_again_has_the_same_bytes(tmp_path: Path) -> None:
    write_appraisal(tmp_path / "one.json", THREE)
    write_appraisal(tmp_path / "two.json", read_appraisal(tmp_path / "one.json"))
    assert (tmp_path / "one.json").read_bytes() == (tmp_path / "two.json").read_bytes()


def test_keys_stand_in_the_order_of_the_record(tmp_path: Path) -> None:
    write_appraisal(tmp_path / "appraisal.json", THREE)
    data = json.loads((tmp_path / "appraisal.json").read_bytes())
    assert list(data) == list(Appraisal.model_fields)
    assert list(data["streams"][0]) == list(type(SODIUM).model_fields)


@settings(max_examples=50, deadline=None)
@given(value=st.floats(allow_nan=False, allow_infinity=False))
def test_a_float_comes_back_to_the_last_bit(value: float, tmp_path_factory: pytest.TempPathFactory) -> None:
    path = tmp_path_factory.mktemp("floats") / "appraisal.json"
    given = appraisal(SODIUM.model_copy(update={"results_per_day": value}))
    write_appraisal(path, given)
    assert read_appraisal(path).streams[0].results_per_day.hex() == value.hex()


def test_an_appraisal_holds_finite_numbers_only() -> None:
    with pytest.raises(ValidationError):
        Figure(value=float("nan"), low=0, high=1)
    with pytest.raises(ValidationError):
        Figure(value=1, low=0, high=float("inf"))


def test_a_missing_file_is_told(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"There is no file .*appraisal\.json"):
        read_appraisal(tmp_path / "appraisal.json")


@pytest.mark.parametrize(
    ("content", "told"),
    [
        (b"", "EOF"),
        (b"not json", "line 1 column 2"),
        (b"\xff\xfe{}", "Invalid JSON"),
        (b"[]", "should be an object"),
        (b"{}", "version: Field required"),
        (b'{"version": 3}', "is of version 3, written by a newer pbm; this one reads version 2"),
        (b'{"version": 2, "laboratory": 5}', "laboratory: Input should be a valid string"),
        (b"[" * 100_000, "recursion"),
    ],
)
def test_a_file_that_is_not_an_appraisal_is_told_in_one_paragraph(tmp_path: Path, content: bytes, told: str) -> None:
    path = tmp_path / "appraisal.json"
    path.write_bytes(content)
    with pytest.raises(InputError) as error:
        read_appraisal(path)
    assert told in str(error.value)
    assert str(error.value).startswith(str(path))
    assert "pbm appraise" in str(error.value)
    assert "\n" not in str(error.value)


def _without_seed(data: dict[str, Any]) -> None:
    del data["seed"]


def _words_for_a_number(data: dict[str, Any]) -> None:
    data["streams"][0]["monitors"][0]["false_alarms"]["days"] = "forty"


def _nan(data: dict[str, Any]) -> None:
    data["streams"][0]["monitors"][0]["admitted"] = float("nan")


def _unknown_key(data: dict[str, Any]) -> None:
    data["streams"][1]["colour"] = "red"


@pytest.mark.parametrize(
    ("change", "told"),
    [
        (_without_seed, "seed: Field required"),
        (_words_for_a_number, "streams[1].monitors[1].false_alarms.days: Input should be a valid integer"),
        (_nan, "streams[1].monitors[1].admitted: Input should be a finite number"),
        (_unknown_key, "streams[2].colour: Extra inputs are not permitted"),
    ],
)
def test_a_mistake_is_told_by_its_key(tmp_path: Path, change: Callable[[dict[str, Any]], None], told: str) -> None:
    path = tmp_path / "appraisal.json"
    write_appraisal(path, THREE)
    data = json.loads(path.read_bytes())
    change(data)
    path.write_text(json.dumps(data))
    with pytest.raises(InputError) as error:
        read_appraisal(path)
    assert told in str(error.value)


def test_of_very_many_mistakes_the_first_are_told(tmp_path: Path) -> None:
    path = tmp_path / "appraisal.json"
    path.write_text(json.dumps({"version": 1, "streams": [{}] * 100}))
    with pytest.raises(InputError, match=r"and \d+ more") as error:
        read_appraisal(path)
    assert len(str(error.value)) < 1000


def test_a_failed_write_leaves_the_old_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "appraisal.json"
    write_appraisal(path, THREE)
    before = path.read_bytes()

    def full_disk(*_: object) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("os.fsync", full_disk)
    with pytest.raises(OSError, match="No space"):
        write_appraisal(path, appraisal())
    assert path.read_bytes() == before
    assert list(tmp_path.iterdir()) == [path]


def test_names_are_written_as_they_are(tmp_path: Path) -> None:
    write_appraisal(tmp_path / "appraisal.json", hostile())
    assert read_appraisal(tmp_path / "appraisal.json").laboratory == HOSTILE


def test_an_appraisal_does_not_differ_from_itself() -> None:
    assert differences(THREE, THREE.model_copy(deep=True)) == []


def test_what_differs_is_told_by_stream_and_fault_with_both_values() -> None:
    judged = SODIUM.judged
    assert judged is not None
    changed = judged.faults[1].model_copy(update={"weight": 3.0})
    faults = (judged.faults[0], changed, *judged.faults[2:])
    other = SODIUM.model_copy(update={"judged": judged.model_copy(update={"faults": faults}), "onsets": 1})
    given = appraisal(SODIUM)
    assert differences(given, appraisal(other).model_copy(update={"seed": 1})) == [
        "seed: 20310302 -> 1",
        "streams[sodium@line-2].onsets: 2000 -> 1",
        "streams[sodium@line-2].judged.faults[shift +0.25 TEa].weight: 1.0 -> 3.0",
    ]


def test_streams_that_are_in_one_appraisal_only_are_counted() -> None:
    assert "streams: 4 entries -> 1 entries" in differences(THREE, appraisal(SODIUM))
