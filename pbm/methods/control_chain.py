"""Control rules as an absorbing Markov chain over control events: the exact way to the chance of passing.

The rules' limits cut the axis into zones. What the count rules remember between events is a finite state (`control_judge`), and which state
follows depends only on the zones of the event's measurements. With P(zones) the joint probability of the zones under the fault, and of
a range within the range rule,

    v_k[next(s, zones)] += v_{k-1}[s] P(zones)   over the zones that are accepted,    S_k = sum of v_k

v_0 is the quasi-stationary distribution of the in-control chain: the state of a laboratory whose events so far all passed. For independent
measurements P(zones) is a product; with a range rule it is integrated over the smallest measurement x (density f_i, zone z_i),

    P(zones, range <= R) = sum_i  int_{z_i} f_i(x) prod_{j != i} P(x_j in z_j and x < x_j <= x + R) dx

Source of the chain: "Exact results for Shewhart control charts with supplementary runs rules", Technometrics 1987;29:393-9.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cache, cached_property
from typing import Any

import numpy as np
from scipy.special import ndtr

from pbm.methods.control_judge import Judge, accepts, still_needed
from pbm.methods.control_rules import Rules
from pbm.methods.jit import Floats, Integers, compiled, kernel

LARGEST = 500_000
NODES, WEIGHTS = np.polynomial.legendre.leggauss(10)
TAIL = 8.5
SETTLED = 1e-13
PATIENCE = 10_000


@cache
def _expansion_loop() -> Callable[..., Any]:
    law, forget = compiled(accepts), compiled(still_needed)

    def loop(states: Integers, values: Floats, after: Integers, passed: Integers, *judge: Any) -> None:
        needed, window, per_rule = judge[2], judge[3], 2 * judge[4]
        for s in range(len(states)):
            for t in range(len(values)):
                row = s * len(values) + t
                for c in range(after.shape[1]):  # a copy of whole rows takes numba three seconds longer to compile
                    after[row, c] = states[s, c]
                passed[row] = 1 if law(after[row], values[t], *judge) else 0
                for c in range(after.shape[1]):
                    r = c // per_rule
                    if needed[r] < window[r]:
                        after[row, c] = forget(after[row, c], needed[r], window[r])

    return compiled(loop)


@kernel
def _advance(before: Floats, following: Integers, chance: Floats, after: Floats) -> None:
    after[:] = 0.0
    for s in range(following.shape[0]):
        if before[s] > 0.0:
            for t in range(following.shape[1]):
                if following[s, t] >= 0:
                    after[following[s, t]] += before[s] * chance[t]


@dataclass(frozen=True)
class Chain:
    """The chain of a rule set for given levels and repeats.

    Attributes
    ----------
    edges : (zones + 1,)
        Ends of the zones inside the outermost limit, in SD.
    level : (w,)
        Level of each measurement of an event.
    spread
        Range of one event above which it is rejected.
    following : (states, zones ** w)
        State after an event, by the zones of its measurements (the last varies fastest); -1 where the event is rejected. State 0 remembers
        nothing.
    """

    edges: Floats
    level: Integers
    spread: float
    following: Integers

    def chances(self, bias: Floats, multiple: float, share: float = 1.0) -> Floats:
        """Joint probability of the zones of an event's measurements, shape (zones ** w,).

        Parameters
        ----------
        bias : (levels,)
            Shift of each level, in its SD.
        multiple
            Factor on the SD.
        share
            Chance that a measurement is shifted, each for itself.
        """
        mean = bias[self.level]
        if np.isinf(self.spread) or len(mean) == 1:
            return _joint(np.diff(_below(self.edges, mean[:, None], multiple, share), axis=1)[:, None, :])
        total = np.zeros((len(self.edges) - 1) ** len(mean))
        for i in range(len(mean)):
            total += share * self._with_smallest(i, float(mean[i]), mean, multiple, share)
            if share < 1:
                total += (1 - share) * self._with_smallest(i, 0.0, mean, multiple, share)
        return total

    def _with_smallest(self, smallest: int, about: float, mean: Floats, multiple: float, share: float) -> Floats:
        """Joint probability of the zones, of a range within the limit, and of one measurement, with mean `about`, being the smallest."""
        x, weight = self._nodes(about, multiple)
        density = weight * np.exp(-(((x - about) / multiple) ** 2) / 2) / (multiple * np.sqrt(2 * np.pi))
        ends = np.clip(self.edges[None, :], x[:, None], x[:, None] + self.spread)
        parts = np.stack([np.diff(_below(ends, m, multiple, share), axis=1) for m in mean])
        zone = np.clip(np.searchsorted(self.edges, x) - 1, 0, len(self.edges) - 2)
        parts[smallest] = 0.0
        parts[smallest, np.arange(len(x)), zone] = density
        return _joint(parts)

    def _nodes(self, mean: float, multiple: float) -> tuple[Floats, Floats]:
        """Gauss-Legendre nodes and weights between the kinks of the integrand, over the zones and the bulk of the density."""
        low = max(float(self.edges[0]), mean - TAIL * multiple)
        high = min(float(self.edges[-1]), mean + TAIL * multiple)
        if low >= high:
            return np.array([mean]), np.zeros(1)
        kinks = np.concatenate([self.edges, self.edges - self.spread, np.arange(low, high, multiple)])
        cuts = np.unique(np.append(kinks[(kinks > low) & (kinks < high)], [low, high]))
        middle, half = (cuts[1:] + cuts[:-1]) / 2, np.diff(cuts) / 2
        return (middle[:, None] + half[:, None] * NODES).ravel(), (half[:, None] * WEIGHTS).ravel()

    def after(self, before: Floats, chances: Floats) -> Floats:
        """Distribution over states after an accepted event, shape (states,); what is missing from 1 was rejected."""
        result = np.empty_like(before)
        _advance(before, self.following, chances, result)
        return result

    def fresh(self) -> Floats:
        """The distribution before the first event ever, shape (states,)."""
        start = np.zeros(len(self.following))
        start[0] = 1.0
        return start

    @cached_property
    def accepted_history(self) -> Floats:
        """The quasi-stationary distribution of the in-control chain, shape (states,).

        Raises
        ------
        ValueError
            If no history passes.
        """
        chances = self.chances(np.zeros(int(self.level[-1]) + 1), 1.0)
        state = self.fresh()
        for _ in range(PATIENCE):
            following = self.after(state, chances)
            if (kept := float(following.sum())) == 0:
                raise ValueError("these rules reject every in-control event; no history passes them")
            following /= kept
            change = float(np.abs(following - state).sum())
            state = following
            if change < SETTLED:
                break
        return state

    def events_to_rejection(self, start: Floats, chances: Floats) -> float:
        """Mean number of events until one is rejected, that one included: sum of S_k, geometric once the state has settled.

        Infinite where rejection is too rare to be told from never (less than 1e-13 an event).

        Parameters
        ----------
        start : (states,)
            Distribution before the first event.
        chances : (zones ** w,)
            From `chances`.
        """
        total, state, running, change = 0.0, start, 1.0, 1.0
        while running > SETTLED * total:
            total += running
            following = self.after(state, chances)
            kept = float(following.sum())
            running *= kept
            if kept > 0:
                following /= kept
                change = float(np.abs(following - state).sum())
                state = following
            if change < SETTLED:
                return total + running / (1 - kept) if 1 - kept > SETTLED else np.inf
        return total


def _below(ends: Floats, mean: Floats | float, multiple: float, share: float) -> Floats:
    """Chance of a measurement below each end: about the mean with a chance of `share`, else about 0."""
    shifted: Floats = ndtr((ends - mean) / multiple)
    return shifted if share == 1 else share * shifted + (1 - share) * ndtr(ends / multiple)


def _joint(parts: Floats) -> Floats:
    """From (w, n, zones) to (zones ** w,): the product over the measurements summed over n, the last measurement varying fastest."""
    half = len(parts) // 2
    return np.asarray(_outer_product(parts[:half]).T @ _outer_product(parts[half:])).ravel()


def _outer_product(parts: Floats) -> Floats:
    product = np.ones((parts.shape[1], 1))
    for part in parts:
        product = (product[:, :, None] * part[:, None, :]).reshape(len(product), -1)
    return product


def zone_edges(rules: Rules) -> Floats:
    """Ends of the zones that the rules tell apart, inside the outermost limit, in SD."""
    limits = [rule.limit for rule in rules.counts] + [rules.opposite]
    cuts = {side * limit for limit in limits for side in (-1, 1) if limit < rules.outer}
    return np.array([-rules.outer, *sorted(cuts), rules.outer])


def _zone_values(edges: Floats) -> Floats:
    """A value inside each zone."""
    reach = 1.0 + float(np.abs(edges[np.isfinite(edges)]).max(initial=0.0))
    ends = np.clip(edges, -reach, reach)
    return np.asarray((ends[1:] + ends[:-1]) / 2)


@cache
def chain_of(rules: Rules, repeats: tuple[int, ...]) -> Chain | None:
    """The chain of a rule set, or None where it would be too large to be worth its exactness."""
    judge = Judge.of(rules, np.array(repeats))
    edges = zone_edges(rules)
    if (len(edges) - 1) ** judge.width > LARGEST:
        return None
    zones = np.indices((len(edges) - 1,) * judge.width).reshape(judge.width, -1).T
    following = _following(replace(judge, spread=np.inf), _zone_values(edges)[zones], rules.scope == "event")
    return None if following is None else Chain(edges, judge.level, rules.spread, following)


def _following(judge: Judge, values: Floats, forget: bool) -> Integers | None:
    """Number the states as they are reached from the one that remembers nothing, and note which follows which."""
    first = np.zeros((1, judge.state_size), dtype=np.int64)
    number = {first.tobytes(): 0}
    blocks: list[Integers] = []
    frontier = first
    while len(frontier):
        after, passed = _expanded(judge, frontier, values)
        if forget:
            return np.where(passed, 0, -1)[None, :]
        known = len(number)
        found = [
            number.setdefault(state.tobytes(), len(number)) if ok else -1
            for state, ok in zip(after, passed, strict=True)
        ]
        blocks.append(np.array(found).reshape(len(frontier), -1))
        if len(number) * len(values) > LARGEST:
            return None
        new = bytearray().join(list(number)[known:])
        frontier = np.frombuffer(new, dtype=np.int64).reshape(len(number) - known, judge.state_size)
    return np.concatenate(blocks)


def _expanded(judge: Judge, states: Integers, values: Floats) -> tuple[Integers, Integers]:
    """What each state becomes by each event, and whether the event passes; states vary slowest."""
    after = np.empty((len(states) * len(values), judge.state_size), dtype=np.int64)
    passed = np.empty(len(after), dtype=np.int64)
    _expansion_loop()(states, values, after, passed, *judge.law)
    return after, passed
