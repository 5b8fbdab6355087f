"""The survey on real results: what is slow and odd in them is said, and its figures are those of pandas."""

import json
from pathlib import Path

import pandas as pd
import pytest

from tests.corridor.conftest import done

pytestmark = pytest.mark.slow


def test_the_growing_spread_of_real_hdl_results_is_told_with_the_alarms_that_it_will_cost(hdl: Path) -> None:
    told = " ".join(done("survey", "--lab", hdl, "--workers", "1").split())
    (stream,) = json.loads((hdl / "reports" / "survey.json").read_text())["streams"]
    read = pd.read_csv(hdl / "hdl.csv", parse_dates=["reported_at"])
    by_month = read.groupby(read["reported_at"].dt.strftime("%Y-%m"))["result"].agg(["size", "median", "mean", "std"])
    assert [month["month"] for month in stream["months"]] == list(by_month.index)
    for month, true in zip(stream["months"], by_month.itertuples(index=False), strict=True):
        assert (month["results"], month["median"]) == (true[0], true[1])
        assert (month["mean"], month["spread"]) == pytest.approx((true[2], true[3]), rel=1e-9)
    assert by_month["std"].iloc[0] < 15
    assert by_month["std"].iloc[-1] > 16.9
    assert stream["verdict"] == "useful"
    assert stream["later_third"]["alarms_at_least"] > 1.5
    assert "The last third of the days, from 2031-05-20, differs from what came before" in told
    assert "times as often as the budget allows" in told
    assert "(by month from 14.8 to 17)" in told


def test_two_results_a_day_are_not_useful_for_a_same_day_guard(light_chain_study: Path) -> None:
    done("survey", "--lab", light_chain_study, "--workers", "1")
    found = json.loads((light_chain_study / "reports" / "survey.json").read_text())["streams"]
    assert {stream["verdict"] for stream in found} == {"not useful here"}
    assert [stream["distribution"]["step_found"] for stream in found] == [0.1, 0.001]
