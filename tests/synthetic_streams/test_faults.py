"""A fault's truth: what it adds, to which results, and that nothing else changes."""

from dataclasses import replace

import numpy as np
import pytest

from synthetic_streams import Fault, Laboratory, stream_sample
from synthetic_streams.analytes import BY_KEY
from synthetic_streams.laboratory import StreamSample

SODIUM = BY_KEY["sodium"]


@pytest.fixture(scope="module")
def onset(laboratory: Laboratory) -> int:
    sample = laboratory.sample(SODIUM, "line-2")
    return int(sample.time[len(sample) // 2])


def faulty(
    laboratory: Laboratory, key: str, line: str, onset: int, kind: str, size: float, **more: object
) -> StreamSample:
    fault = replace(Fault(key, line, onset, kind, size), **more)  # type: ignore[arg-type]
    return laboratory.sample(BY_KEY[key], line, [fault])


@pytest.mark.parametrize("size", [0.75, -0.75])
def test_a_shift_in_tea_acts_from_its_onset_on_and_nowhere_before(
    laboratory: Laboratory, onset: int, size: float
) -> None:
    sample = faulty(laboratory, "sodium", "line-2", onset, "shift", size)
    after = sample.time >= onset
    assert after.any() and not after.all()
    assert (sample.error[after] == 4 * size).all()
    assert (sample.error[~after] == 0).all()
    assert (sample.text[~after] == sample.text_without[~after]).all()


def test_without_the_fault_the_results_are_those_of_the_faultless_laboratory(
    laboratory: Laboratory, onset: int
) -> None:
    healthy = laboratory.sample(SODIUM, "line-2")
    sample = faulty(laboratory, "sodium", "line-2", onset, "shift", 1.0)
    assert (sample.text_without == healthy.text).all()
    assert (sample.time == healthy.time).all()
    np.testing.assert_allclose(sample.raw - sample.error, healthy.raw, rtol=0, atol=1e-9)


@pytest.mark.parametrize(
    ("key", "line", "kind", "size"),
    [
        ("sodium", "line-2", "shift", 0.6),
        ("glucose", "line-1", "shift", -0.5),
        ("calcium", "line-1", "drift", 1.0),
        ("tsh", "immuno-1", "noise", 3.0),
        ("alt", "line-2", "sporadic", 2.0),
    ],
)
def test_the_error_is_reported_minus_what_would_have_been_reported_within_rounding(
    laboratory: Laboratory, onset: int, key: str, line: str, kind: str, size: float
) -> None:
    sample = faulty(laboratory, key, line, onset, kind, size)
    printed = (sample.censor == 0) & ~np.char.startswith(sample.text_without.astype(str), "<")
    difference = (sample.value - sample.value_without - sample.error)[printed]
    assert np.abs(difference).max() <= sample.analyte.step + 1e-9
    assert (sample.error != 0).any()


def test_a_shift_in_percent_is_a_share_of_the_undisturbed_value(laboratory: Laboratory, onset: int) -> None:
    sample = faulty(laboratory, "creatinine", "line-1", onset, "shift", 10, unit="percent")
    after = sample.time >= onset
    np.testing.assert_allclose(sample.error[after], 0.1 * (sample.raw - sample.error)[after], rtol=1e-9)


def test_a_shift_in_sd_is_a_multiple_of_the_analytic_sd(laboratory: Laboratory, onset: int) -> None:
    sample = faulty(laboratory, "calcium", "line-1", onset, "shift", 2, unit="SD")
    after = sample.time >= onset
    undisturbed = (sample.raw - sample.error)[after]
    np.testing.assert_allclose(sample.error[after], 2 * sample.analyte.sd(undisturbed), rtol=1e-9)


def test_a_drift_grows_linearly_over_its_results_and_then_stays(laboratory: Laboratory, onset: int) -> None:
    sample = faulty(laboratory, "sodium", "line-2", onset, "drift", 1.0, over=100)
    error = sample.error[np.searchsorted(sample.time, onset) :]
    distinct = np.unique(sample.time[sample.time >= onset], return_counts=True)[1]
    assert error[-1] == error.max() == 4.0
    assert (np.diff(error) >= 0).all()
    reached = np.repeat(np.cumsum(distinct), distinct)
    np.testing.assert_allclose(error, 4.0 * np.minimum(reached, 100) / 100)


def test_noise_multiplies_the_analytic_sd(laboratory: Laboratory, onset: int) -> None:
    sample = faulty(laboratory, "sodium", "line-2", onset, "noise", 3.0)
    error = sample.error[sample.time >= onset] / 0.9
    assert abs(error.mean()) < 4 * np.sqrt(8 / len(error))
    assert error.std() == pytest.approx(np.sqrt(8), rel=4 / np.sqrt(2 * len(error)))


def test_a_sporadic_error_hits_its_share_of_results_with_its_whole_size(laboratory: Laboratory, onset: int) -> None:
    sample = faulty(laboratory, "sodium", "line-2", onset, "sporadic", 1.5, share=0.2)
    error = sample.error[sample.time >= onset]
    assert set(error.tolist()) == {0.0, 6.0}
    assert abs((error > 0).mean() - 0.2) < 4 * np.sqrt(0.16 / len(error))


def test_faults_of_one_stream_add_up_and_leave_other_streams_alone(laboratory: Laboratory, onset: int) -> None:
    faults = [Fault("sodium", "line-2", onset, "shift", size) for size in (0.5, 0.25)]
    assert laboratory.sample(SODIUM, "line-2", faults).error.max() == 3.0
    assert (laboratory.sample(SODIUM, "line-1", faults).error == 0).all()


def test_a_fresh_stream_is_that_of_the_whole_laboratory() -> None:
    alone = stream_sample("tsh", "immuno-1", days=5, seed=11)
    whole = Laboratory(5, 1.0, 11).sample(BY_KEY["tsh"], "immuno-1")
    assert (alone.text == whole.text).all() and (alone.time == whole.time).all()
    assert not np.array_equal(alone.raw, stream_sample("tsh", "immuno-1", days=5, seed=12).raw[: len(alone)])


@pytest.mark.parametrize(
    ("key", "line", "kind", "size", "more"),
    [
        ("sodium", "line-3", "shift", 1.0, {}),
        ("urate", "line-1", "shift", 1.0, {}),
        ("sodium", "line-1", "jump", 1.0, {}),
        ("sodium", "line-1", "shift", 1.0, {"unit": "tea"}),
        ("sodium", "line-1", "noise", 0.5, {}),
        ("sodium", "line-1", "drift", 1.0, {"over": 0}),
        ("sodium", "line-1", "sporadic", 1.0, {"share": 1.5}),
    ],
)
def test_an_impossible_fault_is_refused(key: str, line: str, kind: str, size: float, more: dict[str, object]) -> None:
    with pytest.raises(ValueError, match=r"expected|not a stream"):
        Fault(key, line, 0, kind, size, **more)  # type: ignore[arg-type]
