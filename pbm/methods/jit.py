"""One law, one body: a step is a plain Python function, and the loops over history are compiled around that same function.

The live monitor calls a step as it stands, on a list. History and simulation call the loops made here, on arrays; numba compiles step
and loop together on first use, once per process, without fast-math and without a disk cache (a cached loop keeps old numbers after an
edit of a step in another file). A value that is not a number stands for a result that was dropped: it moves no state.
"""

from collections.abc import Callable, MutableSequence, Sequence
from functools import cache, wraps
from typing import Any, TypeVar

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]
Integers = npt.NDArray[np.int64]
State = MutableSequence[float]
Parameters = Sequence[float]
# `step(state, x, par) -> value` changes the state in place; the value is not a number while it is not judged yet.
Step = Callable[[State, float, Parameters], float]
Judge = Callable[[int, float, float, float, float, float], int]
F = TypeVar("F", bound=Callable[..., Any])


@cache
def compiled(function: Callable[..., Any]) -> Callable[..., Any]:
    """The function compiled by numba on first call; the same object each time it is asked for."""
    import numba

    made: Callable[..., Any] = numba.njit(function)
    return made


def kernel(function: F) -> F:
    """A loop over arrays that is always run compiled (and compiled only when first called)."""

    @wraps(function)
    def run(*arguments: Any) -> Any:
        return compiled(function)(*arguments)

    return run  # type: ignore[return-value]


@cache
def _scan_loop(step: Step) -> Callable[..., Any]:
    law = compiled(step)

    def loop(state: Floats, xs: Floats, par: Parameters, out: Floats) -> None:
        for i in range(len(xs)):
            out[i] = law(state, xs[i], par) if xs[i] == xs[i] else np.nan

    return compiled(loop)


@cache
def _until_loop(step: Step, judge: Judge) -> Callable[..., Any]:
    law, rule = compiled(step), compiled(judge)

    def loop(
        states: Floats,
        episodes: Integers,
        starts: Integers,
        ends: Integers,
        xs: Floats,
        par: Parameters,
        limits: tuple[float, float, float, float],
        found: Integers,
    ) -> None:
        low, high, centre, rearm = limits
        state = np.empty(states.shape[1])
        for j in range(len(starts)):
            for c in range(len(state)):  # not by whole rows: numba takes seconds longer to compile that
                state[c] = states[j, c]
            episode = episodes[j]
            found[j] = -1
            for i in range(starts[j], ends[j]):
                if xs[i] == xs[i]:
                    after = rule(episode, law(state, xs[i], par), low, high, centre, rearm)
                    if episode == 0 and after != 0:
                        found[j] = i
                        break
                    episode = after

    return compiled(loop)


@cache
def _states_loop(step: Step) -> Callable[..., Any]:
    law = compiled(step)

    def loop(state: Floats, xs: Floats, par: Parameters, at: Integers, out: Floats) -> None:
        i = 0
        for j in range(len(at)):
            while i < at[j]:
                if xs[i] == xs[i]:
                    law(state, xs[i], par)
                i += 1
            for c in range(len(state)):
                out[j, c] = state[c]

    return compiled(loop)


@cache
def _standing_loop(step: Step, judge: Judge) -> Callable[..., Any]:
    law, rule = compiled(step), compiled(judge)

    def loop(
        state: Floats,
        xs: Floats,
        par: Parameters,
        limits: tuple[float, float, float, float],
        at: Integers,
        out: Floats,
        episodes: Integers,
    ) -> None:
        low, high, centre, rearm = limits
        i = 0
        episode = 0
        for j in range(len(at)):
            while i < at[j]:
                if xs[i] == xs[i]:
                    episode = rule(episode, law(state, xs[i], par), low, high, centre, rearm)
                i += 1
            for c in range(len(state)):
                out[j, c] = state[c]
            episodes[j] = episode

    return compiled(loop)


@cache
def _run_ends_loop(step: Step) -> Callable[..., Any]:
    law = compiled(step)

    def loop(begin: Floats, xs: Floats, par: Parameters, low: float, high: float, ends: Integers) -> int:
        state = begin.copy()
        found = 0
        for i in range(len(xs)):
            if xs[i] == xs[i]:
                s = law(state, xs[i], par)
                if s > high or s < low:
                    ends[found] = i
                    found += 1
                    state[:] = begin
        return found

    return compiled(loop)


@cache
def _map_loop(law: Callable[..., float]) -> Callable[..., Any]:
    body = compiled(law)

    def loop(xs: Floats, par: Parameters, out: Floats) -> None:
        for i in range(len(xs)):
            out[i] = body(xs[i], par)

    return compiled(loop)


@cache
def _map_pair_loop(law: Callable[..., float]) -> Callable[..., Any]:
    body = compiled(law)

    def loop(xs: Floats, ys: Floats, par: Parameters, out: Floats) -> None:
        for i in range(len(xs)):
            out[i] = body(xs[i], ys[i], par)

    return compiled(loop)


def scan(step: Step, state: Floats, xs: Floats, par: Parameters) -> Floats:
    """Statistic after each value.

    Parameters
    ----------
    step
        The statistic.
    state : (s,)
        Changed in place: the state after the last value.
    xs : (n,)
        Values; not-a-number entries are dropped results.
    par
        Parameters of the step.

    Returns
    -------
    (n,)
        The statistic; not a number where dropped or not judged yet.
    """
    out = np.empty(len(xs))
    _scan_loop(step)(state, xs, par, out)
    return out


def until(
    step: Step,
    judge: Judge,
    begun: tuple[Floats, Integers],
    starts: Integers,
    ends: Integers,
    xs: Floats,
    par: Parameters,
    limits: tuple[float, float, float, float],
) -> Integers:
    """Index of the value that opens the first episode, for many starts.

    Parameters
    ----------
    step
        The statistic.
    judge
        The alarm machine, `judge(episode, s, low, high, centre, rearm) -> episode`.
    begun : (r, s), (r,)
        State and episode before the first value of each run; not changed.
    starts, ends : (r,)
        Each run reads xs[start:end].
    xs : (n,)
        Values; not-a-number entries are dropped results.
    par
        Parameters of the step.
    limits
        Low, high, centre, re-arm share.

    Returns
    -------
    (r,)
        Index into xs, -1 where no episode opens.
    """
    found = np.empty(len(starts), dtype=np.int64)
    _until_loop(step, judge)(begun[0], begun[1], starts, ends, xs, par, limits, found)
    return found


def states_at(step: Step, state: Floats, xs: Floats, par: Parameters, at: Integers) -> Floats:
    """State before each of the given indices (not decreasing).

    Returns
    -------
    (r, s)
        One state per index.
    """
    out = np.empty((len(at), len(state)))
    _states_loop(step)(state.copy(), xs, par, at, out)
    return out


def standing_at(
    step: Step,
    judge: Judge,
    state: Floats,
    xs: Floats,
    par: Parameters,
    limits: tuple[float, float, float, float],
    at: Integers,
) -> tuple[Floats, Integers]:
    """State of the statistic and of the alarm machine before each of the given indices (not decreasing), from an armed start.

    Returns
    -------
    (r, s), (r,)
        One state and one episode per index.
    """
    out, episodes = np.empty((len(at), len(state))), np.empty(len(at), dtype=np.int64)
    _standing_loop(step, judge)(state.copy(), xs, par, limits, at, out, episodes)
    return out, episodes


def run_ends(step: Step, begin: Floats, xs: Floats, par: Parameters, low: float, high: float) -> Integers:
    """Runs one after the other, each from the same state: where each ends.

    Parameters
    ----------
    step
        The statistic.
    begin : (s,)
        State at the begin of each run; not changed.
    xs : (n,)
        Values; not-a-number entries are dropped results.
    par
        Parameters of the step.
    low, high
        Control limits; a value on a limit is inside.

    Returns
    -------
    (r,)
        Index into xs of the value that crossed, run by run; what follows the last crossing is a run not ended.
    """
    ends = np.empty(len(xs), dtype=np.int64)
    return ends[: _run_ends_loop(step)(begin, xs, par, low, high, ends)].copy()


def mapped(law: Callable[..., float], xs: Floats, par: Parameters) -> Floats:
    """A scalar law applied to each value in a compiled loop (so that it agrees with plain Python to the last bit).

    Returns
    -------
    (n,)
        law(x, par) for each x.
    """
    out = np.empty(len(xs))
    _map_loop(law)(xs, par, out)
    return out


def mapped_pairs(law: Callable[..., float], xs: Floats, ys: Floats, par: Parameters) -> Floats:
    """A scalar law of two arguments applied pair by pair in a compiled loop.

    Returns
    -------
    (n,)
        law(x, y, par) for each pair.
    """
    out = np.empty(len(xs))
    _map_pair_loop(law)(xs, ys, par, out)
    return out
