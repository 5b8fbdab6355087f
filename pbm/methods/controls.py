"""Chance that control events pass after the onset of a fault.

At the k-th event after the onset each measurement of level i is, in that level's SD, normal with mean b_ki and SD m. With the rules of the
control procedure

    S_k = P(no rejection at the first k events),   S_0 = 1

Events are independent where every rule looks at one event only. Otherwise the events are followed from an accepted in-control history,
long enough to fill every rule's window; by simulation, with its standard error.

Source of the quantity: "Power functions for statistical control rules", Clinical Chemistry 1979;25:863-9.
"""

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache
from typing import Any

import numpy as np
from scipy.special import ndtr

from pbm.methods.control_judge import Judge, accepts
from pbm.methods.control_rules import Rule, Rules, parse_rule
from pbm.methods.jit import Floats, Integers, compiled

__all__ = ["Rule", "Rules", "Survival", "parse_rule", "survival"]

RUNS = 20_000
HISTORIES = 2


@dataclass(frozen=True, slots=True)
class Survival:
    """Chance of passing the first events after an onset.

    Attributes
    ----------
    passed : (K + 1,)
        P(no rejection at the first k events), k = 0 ... K; the first is 1.
    error : (K + 1,)
        Standard errors; 0 where exact.
    """

    passed: Floats
    error: Floats


def survival(
    rules: Rules, bias: Floats, multiple: float, repeats: Integers, random: np.random.Generator, runs: int = RUNS
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
        Generator; not touched where the answer is exact. The same state gives the same normal deviates whatever the bias, so that figures
        vary smoothly over sizes.
    runs
        Simulated runs, less those rejected in their in-control history.

    Raises
    ------
    ValueError
        If the shapes do not fit.
    """
    bias = np.asarray(bias, dtype=np.float64)
    repeats = np.asarray(repeats, dtype=np.int64)
    if bias.ndim != 2 or repeats.shape != bias.shape[1:] or len(repeats) == 0 or repeats.min() < 1:
        raise ValueError(
            f"bias of shape (K, L) and at least one repeat for each of L levels expected, not {bias.shape} and {repeats}"
        )
    if not rules.counts and np.isinf(rules.spread) and np.isinf(rules.opposite):
        return _single_limit(rules.outer, bias, multiple, repeats)
    return _simulated(rules, bias, multiple, repeats, random, runs)


def _single_limit(outer: float, bias: Floats, multiple: float, repeats: Integers) -> Survival:
    """1-Ls alone: each measurement stays within the limits independently of the others."""
    inside = ndtr((outer - bias) / multiple) - ndtr((-outer - bias) / multiple)
    passed = np.append(1.0, np.cumprod(np.prod(inside**repeats, axis=1)))
    return Survival(passed, np.zeros_like(passed))


@cache
def _event_loop() -> Callable[..., Any]:
    law = compiled(accepts)

    def loop(
        running: Integers,
        count: int,
        states: Integers,
        forget: bool,
        z: Floats,
        bias: Floats,
        multiple: float,
        *judge: Any,
    ) -> int:
        x = np.empty(z.shape[1])
        kept = 0
        for j in range(count):
            run = running[j]
            if forget:
                states[run] = 0
            for i in range(len(x)):
                x[i] = multiple * z[run, i] + bias[i]
            if law(states[run], x, *judge):
                running[kept] = run
                kept += 1
        return kept

    return compiled(loop)


def _simulated(
    rules: Rules, bias: Floats, multiple: float, repeats: Integers, random: np.random.Generator, runs: int
) -> Survival:
    """Follow runs event by event; a rejected run is not looked at again."""
    judge = Judge.of(rules, repeats)
    forget = rules.scope == "event"
    states = np.zeros((runs, judge.state_size), dtype=np.int64)
    running = np.arange(runs)
    count = runs
    none = np.zeros(judge.width)
    for _ in range(0 if forget else HISTORIES * judge.events_to_fill):
        z = random.standard_normal((runs, judge.width))
        count = _event_loop()(running, count, states, forget, z, none, 1.0, *judge.law)
    accepted = count
    if accepted == 0:
        raise ValueError(f"no run of {runs} passed its in-control history: the rules reject nearly every event")
    left = np.zeros(len(bias) + 1)
    left[0] = accepted
    for k, shift in enumerate(bias[:, judge.level]):
        if count == 0:
            break
        z = random.standard_normal((runs, judge.width))
        count = _event_loop()(running, count, states, forget, z, shift, multiple, *judge.law)
        left[k + 1] = count
    passed = left / accepted
    return Survival(passed, np.sqrt(passed * (1 - passed) / accepted))
