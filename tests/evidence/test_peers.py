"""The plan's monitors see an error of 1 TEa with fewer results than general drift detectors at the same alarm budget."""

import pytest

from pbm.methods.candidates import QUICK_GRID
from pbm.methods.peers import PEERS
from pbm.records.stream import StreamName
from tests.evidence.peers import STREAMS, met, race


@pytest.mark.slow
def test_on_calcium_the_plan_needs_half_the_results_of_adwin_and_fewer_than_page_hinkley() -> None:
    found = race(StreamName("calcium", "line-1"), ("adwin", "page-hinkley"), grid=QUICK_GRID)
    assert met(found, "adwin")
    assert met(found, "page-hinkley")


@pytest.mark.full
@pytest.mark.parametrize("name", STREAMS, ids=str)
def test_the_plan_needs_half_the_results_of_adwin_and_of_kswin_and_fewer_than_page_hinkley(name: StreamName) -> None:
    found = race(name)
    assert [peer for peer in PEERS if not met(found, peer)] == []
