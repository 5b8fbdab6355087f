"""Expected unreliable results from the onset of a fault until somebody knows, with the control schedule alone and with a monitor.

For an onset before result o let bracket 0 be the results from o to the next control event, bracket i those between event i and i + 1, U_i
the sum of p(x, f) over bracket i and S_i the chance that the first i events all pass. The monitor's first alarm comes with result T after
the onset (the onset's own result is 1) and g more results are reported before the stop. Patients and controls are independent given the
fault, so that

    N_u  = sum_i S_i     * (part of U_i reported before o + T + g)     unreliable results reported
    N_uf = sum_i S_{i+1} * U_i over brackets closed before the alarm   of these final: released before the last accepted event
    N_uc = N_u - N_uf                                                  correctable: in the last, open bracket

T without end gives the schedule alone. What neither finds is followed to a horizon.

Sources: "Effect of analytical run length on quality-control (QC) performance and the QC planning process", Clinical Chemistry
1997;43:2149-54; "Assessing the impact of the frequency of quality control testing on the quality of reported patient results", Clinical
Chemistry 2008;54:2049-54. The joint formulas are the project's own (docs/ideas/unreliable.md).
"""

from dataclasses import dataclass

import numpy as np

from pbm.methods.jit import Floats, Integers


@dataclass(frozen=True, slots=True)
class Onsets:
    """Onsets in a history, each with the control events that follow it, up to its horizon.

    Attributes
    ----------
    at : (r,)
        Index of the first affected result.
    end : (r,)
        Index after the last result followed (the horizon).
    edges : (r, k)
        Index of the first result after the 1st ... k-th control event since the onset; events beyond the horizon stand at `end`.
    """

    at: Integers
    end: Integers
    edges: Integers

    @property
    def length(self) -> Integers:
        """Results followed after each onset, shape (r,)."""
        return self.end - self.at

    @property
    def counts(self) -> Integers:
        """Affected results before each event, shape (r, k)."""
        return self.edges - self.at[:, None]

    @property
    def to_first_event(self) -> Integers:
        """Results from the onset to the first control event, shape (r,)."""
        return self.edges[:, 0] - self.at

    def chosen(self, which: Integers) -> "Onsets":
        """Some of the onsets."""
        return Onsets(self.at[which], self.end[which], self.edges[which])


def instants_of_events(onsets: Onsets, event_positions: Integers, event_times: Integers) -> Integers:
    """When the events after each onset take place, shape (r, k), UTC microseconds; of those beyond the history the last is told."""
    if not len(event_times):
        return np.zeros_like(onsets.edges)
    first = np.searchsorted(event_positions, onsets.at, side="right")
    place = first[:, None] + np.arange(onsets.edges.shape[1])[None, :]
    instants: Integers = event_times[np.minimum(place, len(event_times) - 1)]
    return instants


def follow(at: Integers, end: Integers, event_positions: Integers, events: int) -> Onsets:
    """Onsets with the control events after each.

    Parameters
    ----------
    at, end : (r,)
        First affected result, and the horizon.
    event_positions : (m,)
        Index of the first result after each control event of the history, not decreasing.
    events
        Number k of events to keep for each onset.
    """
    first = np.searchsorted(event_positions, at, side="right")
    place = first[:, None] + np.arange(events)[None, :]
    known = np.append(event_positions, np.iinfo(np.int64).max)
    return Onsets(at, end, np.minimum(known[np.minimum(place, len(event_positions))], end[:, None]))


@dataclass(frozen=True, slots=True)
class Exposure:
    """Expected unreliable results of each onset as a function of when the monitor's alarm comes.

    Attributes
    ----------
    onsets
        The onsets, r of them, with k events each.
    passed : (r, k + 1)
        S_0 ... S_k of each onset.
    sums : (m,)
        Running sums of the chances of the results read.
    starts : (r,)
        Which of them each onset reads first.
    reported_before, final_before : (r, k + 1)
        N_u and N_uf of the brackets before each bracket.
    """

    onsets: Onsets
    passed: Floats
    sums: Floats
    starts: Integers
    reported_before: Floats
    final_before: Floats

    def unreliable(self, stop: Integers) -> Floats:
        """N_u of each onset, shape (r,), if reporting stops after `stop` affected results."""
        each, bracket = np.arange(len(stop)), self._brackets_before(stop)
        begin = np.column_stack([np.zeros_like(stop), self.onsets.counts])[each, bracket]
        inside = self.sums[self.starts + stop] - self.sums[self.starts + np.minimum(begin, stop)]
        found: Floats = self.reported_before[each, bracket] + self.passed[each, bracket] * inside
        return found

    def unreliable_final(self, alarm: Integers) -> Floats:
        """N_uf of each onset, shape (r,), if the alarm comes with affected result `alarm`."""
        return self.final_before[np.arange(len(alarm)), self._brackets_before(alarm)]

    def under(self, onsets: Onsets, passed: Floats) -> "Exposure":
        """The same affected results under another control schedule: the same onsets with its events, and its chances."""
        return _along(onsets, passed, self.sums, self.starts)

    def _brackets_before(self, result: Integers) -> Integers:
        """Brackets that were closed before an affected result, shape (r,)."""
        counted: Integers = (self.onsets.counts < result[:, None]).sum(axis=1)
        return counted


def exposure(onsets: Onsets, p: Floats, passed: Floats) -> Exposure:
    """Accumulate the chance of unreliable results along each onset.

    Parameters
    ----------
    onsets
        With k events each.
    p : (n,) or (r, h)
        Chance that each result is unreliable: per result of the history, or per onset and affected result (a drift).
    passed : (k + 1,) or (r, k + 1)
        Chance that the first i events all pass: the same for all onsets, or of each (a drift).
    """
    sums = _so_far(np.atleast_2d(p))
    starts = np.arange(len(sums)) * sums.shape[1] if p.ndim == 2 else onsets.at
    return _along(onsets, passed, sums.ravel(), starts)


def _along(onsets: Onsets, passed: Floats, sums: Floats, starts: Integers) -> Exposure:
    each = np.broadcast_to(passed, (len(onsets.at), passed.shape[-1]))
    inside = np.diff(sums[starts[:, None] + np.column_stack([np.zeros_like(onsets.at), onsets.counts])], axis=1)
    return Exposure(onsets, each, sums, starts, _so_far(each[:, :-1] * inside), _so_far(each[:, 1:] * inside))


def _so_far(amounts: Floats) -> Floats:
    """What has come together before each column, shape (r, k + 1)."""
    return np.column_stack([np.zeros(len(amounts)), np.cumsum(amounts, axis=1)])
