"""General drift detectors in the harness: the same alarms as in a plain loop, within the same alarm budget."""

import subprocess
import sys

import numpy as np
import pytest

from pbm.methods.jit import Floats
from pbm.methods.peers import PEERS, PeerMonitor, calibrated

LEVEL, SPREAD = 140.0, 2.0
# Sensitivities at which each detector alarms a few times on the stream below.
KEEN = {"adwin": 0.5, "page-hinkley": 8.0, "kswin": 0.05}

each_peer = pytest.mark.parametrize("peer", sorted(PEERS))


def stream(count: int, wander: float = 1.0) -> Floats:
    """Values whose level steps up and down by a number of SDs every 150 of them, a tenth of them dropped."""
    random = np.random.default_rng(3)
    z = random.normal(LEVEL, SPREAD, count) + wander * SPREAD * (np.arange(count) // 150 % 2)
    z[random.random(count) < 0.1] = np.nan
    return z


def plain_loop(monitor: PeerMonitor, z: Floats) -> list[int]:
    """River's own way of use."""
    detector, found = monitor.start(), []
    for i, x in enumerate(z):
        if not np.isnan(x):
            detector.update((float(x) - LEVEL) / SPREAD)
            if detector.drift_detected:
                found.append(i)
    return found


@each_peer
def test_alarms_are_those_of_a_plain_loop_over_the_detector(peer: str) -> None:
    monitor, z = PeerMonitor(peer, KEEN[peer], LEVEL, SPREAD), stream(600)
    assert len(monitor.alarms(z)) >= 2
    assert monitor.alarms(z).tolist() == plain_loop(monitor, z)


@each_peer
def test_a_run_from_the_state_at_an_onset_meets_the_next_alarm_of_the_stream(peer: str) -> None:
    monitor, z = PeerMonitor(peer, KEEN[peer], LEVEL, SPREAD), stream(600)
    alarms = monitor.alarms(z)
    at = np.arange(0, len(z), 37)
    ends = np.full(len(at), len(z))
    expected = [int(alarms[k]) if k < len(alarms) else -1 for k in np.searchsorted(alarms, at)]
    states = monitor.states_at(z, at)
    assert monitor.first_alarms(z, states, at, ends).tolist() == expected
    assert monitor.first_alarms(z, states, at, ends).tolist() == expected, "a run leaves its state as it was"


@each_peer
def test_a_large_error_is_found_soon_after_its_onset_whatever_the_unit(peer: str) -> None:
    monitor, z = PeerMonitor(peer, KEEN[peer], LEVEL, SPREAD), stream(500, wander=0.0)
    at = np.array([200, 230])
    states = monitor.states_at(z, at)
    found = monitor.first_alarms(z + 4 * SPREAD, states, at, np.full(2, 500))
    assert (found >= at).all()
    assert (found < at + 120).all()
    in_other_unit = PeerMonitor(peer, KEEN[peer], 4 * LEVEL, 4 * SPREAD)
    again = in_other_unit.first_alarms(4 * (z + 4 * SPREAD), in_other_unit.states_at(4 * z, at), at, np.full(2, 500))
    assert again.tolist() == found.tolist()


@pytest.mark.parametrize(
    ("peer", "count", "steps"), [("adwin", 3_000, 12), ("page-hinkley", 3_000, 12), ("kswin", 600, 6)]
)
def test_a_calibrated_detector_keeps_within_the_budget_and_a_keener_one_does_not(
    peer: str, count: int, steps: int
) -> None:
    z, expected = stream(count), 2
    monitor = calibrated(peer, z, expected, steps=steps)
    assert len(monitor.alarms(z)) <= expected
    assert monitor.level == np.nanmean(z)
    assert monitor.spread == np.nanstd(z)
    ratio = np.log(PEERS[peer].keen / PEERS[peer].gentle) / 2**steps
    keener = PeerMonitor(peer, monitor.sensitivity * np.exp(ratio), monitor.level, monitor.spread)
    assert len(keener.alarms(z)) > expected


def test_a_stream_that_no_setting_keeps_quiet_is_told() -> None:
    with pytest.raises(ValueError, match=r"KSWIN alarms more often than 0 times at any alpha"):
        calibrated("kswin", stream(300, wander=20.0), 0)


def test_asking_for_the_peers_does_not_load_river() -> None:
    code = "import sys, pbm.methods.peers; sys.exit('river' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0


@each_peer
def test_there_are_no_more_alarms_than_there_are(peer: str) -> None:
    monitor, z = PeerMonitor(peer, KEEN[peer], LEVEL, SPREAD), stream(600)
    count = len(monitor.alarms(z))
    assert monitor.alarms_within(z, count) and monitor.alarms_within(z, count + 0.5)
    assert not monitor.alarms_within(z, count - 0.5) and not monitor.alarms_within(z, 0)
