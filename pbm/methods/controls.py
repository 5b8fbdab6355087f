"""Chance that control events pass after the onset of a fault.

At the k-th event after the onset each measurement of level i is, in that level's SD, normal with mean b_ki and SD m; under a sporadic fault
with a chance of q, else with mean 0. With the rules of the control procedure

    S_k = P(no rejection at the first k events),   S_0 = 1

by an exact Markov chain over the zones that the rules tell apart (`control_chain`); where that would be too large, by simulation with its
standard error. Rules that look beyond one event meet the fault after an in-control history whose events all passed.

Source of the quantity: "Power functions for statistical control rules", Clinical Chemistry 1979;25:863-9.
"""

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache
from typing import Any, Literal, NamedTuple

import numpy as np

from pbm.methods.control_chain import Chain, chain_of
from pbm.methods.control_judge import Judge, accepts
from pbm.methods.control_rules import Rule, Rules, parse_rule
from pbm.methods.jit import Floats, Integers, compiled

__all__ = ["Estimate", "Rule", "Rules", "Survival", "parse_rule", "rejection_probability", "run_length", "survival"]

RUNS = 20_000
# Windows filled once leave S_k up to 0.002 from that of a long accepted history, filled twice less than 0.00003.
HISTORIES = 2


@dataclass(frozen=True, slots=True)
class Survival:
    """Chance of passing the first events after an onset.

    Attributes
    ----------
    passed : (K + 1,)
        P(no rejection at the first k events), k = 0 ... K; the first is 1.
    error : (K + 1,)
        Standard errors; 0 where exact. A simulated one is never 0: it is taken with one run more that passed and one more that did not.
    """

    passed: Floats
    error: Floats


class Estimate(NamedTuple):
    """A figure and its standard error, 0 where exact."""

    value: float
    error: float


def survival(
    rules: Rules,
    bias: Floats,
    multiple: float,
    repeats: Integers,
    random: np.random.Generator | None = None,
    runs: int = RUNS,
    share: float = 1.0,
) -> Survival:
    """Chance that the first k control events after an onset all pass.

    Parameters
    ----------
    rules
        Of the control procedure.
    bias : (K, L)
        At the k-th event after the onset the shift of each level, in that level's SD.
    multiple
        Factor of the fault on the control SD.
    repeats : (L,)
        Measurements of each level at an event.
    random
        Generator for the simulation; not touched where the answer is exact. The same state gives the same normal deviates whatever the
        bias, so that figures vary smoothly over sizes.
    runs
        Simulated runs, less those rejected in their in-control history.
    share
        Chance that a measurement is shifted at all, each for itself (a sporadic fault).

    Raises
    ------
    ValueError
        If the shapes do not fit, or if a simulation is needed and there is no generator.

    Examples
    --------
    >>> found = survival(Rules.parse(["1-3s"]), np.full((2, 1), 3.0), 1.0, np.array([1]))
    >>> found.passed.round(4).tolist(), found.error.tolist()
    ([1.0, 0.5, 0.25], [0.0, 0.0, 0.0])
    """
    bias, repeats = _checked(bias, multiple, repeats)
    if (chain := chain_of(rules, tuple(repeats.tolist()))) is not None:
        passed = _followed(chain, bias, multiple, share)
        return Survival(passed, np.zeros_like(passed))
    return _Simulation.start(rules, repeats, random, runs, accepted=True).survival(bias, multiple, share)


def rejection_probability(
    rules: Rules,
    bias: Floats,
    multiple: float,
    repeats: Integers,
    random: np.random.Generator | None = None,
    runs: int = RUNS,
) -> Estimate:
    """Chance that the first control event after an onset is rejected, all events before it having passed.

    Parameters
    ----------
    bias : (L,)
        Shift of each level, in its SD.
    rules, multiple, repeats, random, runs
        As for `survival`.

    Examples
    --------
    Two measurements at a shift of 2 SD, by patterns within the event alone:

    >>> rules = Rules.parse(["1-3s", "2-2s", "R-4s"], scope="event")
    >>> round(rejection_probability(rules, np.array([2.0, 2.0]), 1.0, np.array([1, 1])).value, 5)
    0.40888
    """
    found = survival(rules, np.atleast_2d(bias), multiple, repeats, random, runs)
    return Estimate(1.0 - float(found.passed[1]), float(found.error[1]))


def run_length(
    rules: Rules,
    bias: Floats,
    multiple: float,
    repeats: Integers,
    start: Literal["fresh", "accepted"] = "fresh",
    random: np.random.Generator | None = None,
    runs: int = RUNS,
) -> Estimate:
    """Average number of control events until one is rejected, that one included.

    With one level measured once, the average number of measurements.

    Parameters
    ----------
    bias : (L,)
        Shift of each level, in its SD, at every event.
    start
        "fresh": no measurement precedes the first event. "accepted": an in-control history whose events all passed.
    rules, multiple, repeats, random, runs
        As for `survival`.

    Examples
    --------
    >>> round(run_length(Rules.parse(["10x"]), np.array([0.0]), 1.0, np.array([1])).value, 6)
    1023.0
    """
    shifts, repeats = _checked(np.atleast_2d(bias), multiple, repeats)
    if Judge.of(rules, repeats).blind:
        return Estimate(np.inf, 0.0)
    if (chain := chain_of(rules, tuple(repeats.tolist()))) is not None:
        before = chain.accepted_history if start == "accepted" else chain.fresh()
        return Estimate(chain.events_to_rejection(before, chain.chances(shifts[0], multiple)), 0.0)
    return _Simulation.start(rules, repeats, random, runs, start == "accepted").run_length(shifts[0], multiple)


def _checked(bias: Floats, multiple: float, repeats: Integers) -> tuple[Floats, Integers]:
    bias, repeats = np.asarray(bias, dtype=np.float64), np.asarray(repeats, dtype=np.int64)
    if bias.ndim != 2 or repeats.shape != bias.shape[1:] or len(repeats) == 0 or repeats.min() < 1:
        found = f"shape {bias.shape} and repeats {repeats.tolist()}"
        raise ValueError(f"a bias for each of L levels, each measured at least once, is expected; found {found}")
    if not (np.isfinite(bias).all() and 0 < multiple < np.inf):
        raise ValueError(
            f"finite biases and a positive multiple of the SD are expected; found a multiple of {multiple}"
        )
    return bias, repeats


def _followed(chain: Chain, bias: Floats, multiple: float, share: float) -> Floats:
    state, chances = chain.accepted_history, np.empty(0)
    passed = np.ones(len(bias) + 1)
    for k, shift in enumerate(bias):
        if k == 0 or (shift != bias[k - 1]).any():
            chances = chain.chances(shift, multiple, share)
        state = chain.after(state, chances)
        passed[k + 1] = min(state.sum(), passed[k])
    return passed


@cache
def _event_loop() -> Callable[..., Any]:
    law = compiled(accepts)

    def loop(
        running: Integers, states: Integers, forget: bool, z: Floats, bias: Floats, multiple: float, *judge: Any
    ) -> int:
        x = np.empty(z.shape[1])
        kept = 0
        for run in running:
            if forget:
                states[run] = 0
            for i in range(len(x)):
                x[i] = multiple * z[run, i] + bias[i]
            if law(states[run], x, *judge):
                running[kept] = run
                kept += 1
        return kept

    return compiled(loop)


@dataclass(slots=True)
class _Simulation:
    """Runs followed event by event; a rejected run is not looked at again, and nothing is drawn once none is left."""

    judge: Judge
    forget: bool
    random: np.random.Generator
    states: Integers
    running: Integers

    @classmethod
    def start(
        cls, rules: Rules, repeats: Integers, random: np.random.Generator | None, runs: int, accepted: bool
    ) -> "_Simulation":
        """New runs, each with an in-control history that passed if it is wanted."""
        if random is None:
            raise ValueError("these rules need a simulation on so many measurements: give a random generator")
        judge = Judge.of(rules, repeats)
        states = np.zeros((runs, judge.state_size), dtype=np.int64)
        begun = cls(judge, rules.one_event_only, random, states, np.arange(runs))
        for _ in range(HISTORIES * judge.events_to_fill if accepted and not begun.forget else 0):
            begun.event(np.zeros(len(repeats)), 1.0)
        if len(begun.running) == 0:
            raise ValueError(
                f"none of {runs} simulated runs passed its in-control history: the rules reject nearly every event"
            )
        return begun

    def event(self, bias: Floats, multiple: float, share: float = 1.0) -> None:
        """One control event; all runs draw, so that the deviates of a run do not depend on the fate of others."""
        z = self.random.standard_normal((len(self.states), self.judge.width))
        shift = bias[self.judge.level]
        if share < 1:
            z += np.where(self.random.random(z.shape) < share, shift, 0.0) / multiple
            shift = np.zeros_like(shift)
        kept = _event_loop()(self.running, self.states, self.forget, z, shift, multiple, *self.judge.law)
        self.running = self.running[:kept]

    def survival(self, bias: Floats, multiple: float, share: float) -> Survival:
        """Share of runs that pass each further event."""
        left = np.zeros(len(bias) + 1)
        left[0] = len(self.running)
        for k, shift in enumerate(bias):
            if len(self.running) == 0:
                break
            self.event(shift, multiple, share)
            left[k + 1] = len(self.running)
        cautious = (left + 1) / (left[0] + 2)
        error = np.sqrt(cautious * (1 - cautious) / left[0])
        error[0] = 0.0
        return Survival(left / left[0], error)

    def run_length(self, bias: Floats, multiple: float) -> Estimate:
        """Mean events until each run is rejected."""
        runs = len(self.running)
        total = squares = events = 0
        while before := len(self.running):
            self.event(bias, multiple)
            events += 1
            total += events * (before - len(self.running))
            squares += events**2 * (before - len(self.running))
        mean = total / runs
        return Estimate(mean, float(np.sqrt((squares / runs - mean**2) / runs)))
