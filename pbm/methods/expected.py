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

from pbm.methods.jit import Floats, Integers, kernel


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
    def to_first_event(self) -> Integers:
        """Results from the onset to the first control event, shape (r,)."""
        return self.edges[:, 0] - self.at

    def chosen(self, which: Integers) -> "Onsets":
        """Some of the onsets."""
        return Onsets(self.at[which], self.end[which], self.edges[which])


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


@kernel
def _accumulate(
    at: Integers,
    end: Integers,
    edges: Integers,
    p: Floats,
    by_onset: bool,
    passed: Floats,
    reported: Floats,
    final: Floats,
) -> None:
    for r in range(len(at)):
        bracket = 0
        inside = 0.0
        reported[r, 0] = 0.0
        final[r, 0] = 0.0
        for j in range(end[r] - at[r]):
            closed = 0.0
            while bracket < edges.shape[1] and edges[r, bracket] <= at[r] + j and edges[r, bracket] < end[r]:
                closed += passed[r, bracket + 1] * inside
                inside = 0.0
                bracket += 1
            chance = p[r, j] if by_onset else p[0, at[r] + j]
            inside += chance
            reported[r, j + 1] = reported[r, j] + passed[r, bracket] * chance
            final[r, j + 1] = final[r, j] + closed
        for j in range(end[r] - at[r] + 1, reported.shape[1]):
            reported[r, j] = reported[r, j - 1]
            final[r, j] = final[r, j - 1]


@dataclass(frozen=True, slots=True)
class Exposure:
    """Expected unreliable results of each onset as a function of when the monitor's alarm comes.

    Attributes
    ----------
    onsets
        The onsets.
    passed : (k + 1,) or (r, k + 1)
        S_0 ... S_k, the same for all onsets or of each.
    reported, final : (r, h + 1)
        N_u if reporting stops after j affected results, and N_uf if the alarm comes with the j-th.
    """

    onsets: Onsets
    passed: Floats
    reported: Floats
    final: Floats

    def unreliable(self, stop: Integers) -> Floats:
        """N_u of each onset, shape (r,), if reporting stops after `stop` affected results."""
        return self.reported[np.arange(len(stop)), stop]

    def unreliable_final(self, alarm: Integers) -> Floats:
        """N_uf of each onset, shape (r,), if the alarm comes with affected result `alarm`."""
        return self.final[np.arange(len(alarm)), alarm]


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
    width = int(onsets.length.max()) + 1 if len(onsets.at) else 1
    reported = np.empty((len(onsets.at), width))
    final = np.empty_like(reported)
    each = np.array(np.broadcast_to(passed, (len(onsets.at), passed.shape[-1])))
    _accumulate(onsets.at, onsets.end, onsets.edges, np.atleast_2d(p), p.ndim == 2, each, reported, final)
    return Exposure(onsets, passed, reported, final)
