"""Control rules by their trade notation, as numbers.

    k-Ls           k measurements in a row beyond L SD of the level's mean, all on the same side      1-3s, 2-2s, 4-1s
    kofm-Ls        k of m measurements in a row beyond L SD, the k on the same side                   2of3-2s
    kx             k measurements in a row on the same side of the mean                              8x, 10x
    R-Ls           largest less smallest measurement of one event more than L SD                      R-4s
    R-Ls-opposite  in one event one measurement beyond +L/2 SD and another beyond -L/2 SD             R-4s-opposite

Each measurement counts in units of its own level's SD from its own level's mean. Every rule named rejects: where 1-2s only warns, it is
left out. R-4s has both readings in print, and they differ (false rejection of 1-3s/2-2s/R-4s with two measurements: 0.97 % by the range,
0.72 % by opposite limits). The range is the default reading.

Sources: "Performance characteristics of rules for internal quality control: probabilities for false rejection and error detection",
Clinical Chemistry 1977;23:1857-67; "A multi-rule Shewhart chart for quality control in clinical chemistry", Clinical Chemistry
1981;27:493-501.
"""

import re
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Literal

LONGEST = 50
_NUMBER = r"(\d+(?:\.\d+)?)"
_ROW = re.compile(rf"(\d+)-{_NUMBER}s")
_SHARE = re.compile(rf"(\d+)of(\d+)-{_NUMBER}s")
_SIDE = re.compile(r"(\d+)x")
_RANGE = re.compile(rf"R-{_NUMBER}s(-opposite)?")
UNDERSTOOD = (
    "k-Ls as in 1-3s, 2-2s or 4-1s, kofm-Ls as in 2of3-2s, kx as in 10x, R-4s (range within one event) and R-4s-opposite "
    "(one beyond +2 s and another beyond -2 s in one event)"
)


@dataclass(frozen=True, slots=True)
class Rule:
    """One control rule.

    Attributes
    ----------
    notation
        As written in the trade.
    kind
        "count": `needed` of `window` measurements in a row beyond `limit` on the same side. "range": largest less smallest measurement
        of an event above `limit`. "opposite": in one event one measurement beyond +`limit` and another beyond -`limit`.
    limit
        In SD.
    needed, window
        k and m of a count rule; 0 for the others.
    """

    notation: str
    kind: Literal["count", "range", "opposite"]
    limit: float
    needed: int = 0
    window: int = 0

    @property
    def title(self) -> str:
        """As people read it."""
        if self.kind == "range":
            return f"{self.notation}: range of one event more than {self.limit:g} SD (the default reading)"
        if self.kind == "opposite":
            return f"{self.notation}: one beyond +{self.limit:g} SD and another beyond -{self.limit:g} SD in one event"
        beyond = f"beyond {self.limit:g} SD, on the same side" if self.limit else "on the same side of the mean"
        if self.needed == 1:
            return f"{self.notation}: one beyond {self.limit:g} SD"
        if self.needed == self.window:
            return f"{self.notation}: {self.needed} in a row {beyond}"
        return f"{self.notation}: {self.needed} of {self.window} in a row {beyond}"


def parse_rule(text: str) -> Rule:
    """A rule from its trade notation.

    Raises
    ------
    ValueError
        What was found and what is understood.

    Examples
    --------
    >>> parse_rule("2of3-2s").title
    '2of3-2s: 2 of 3 in a row beyond 2 SD, on the same side'
    >>> parse_rule("R-4s").title
    'R-4s: range of one event more than 4 SD (the default reading)'
    """
    notation = text.strip()
    if found := _RANGE.fullmatch(notation):
        limit, opposite = float(found[1]), found[2] is not None
        return _checked(Rule(notation, "opposite" if opposite else "range", limit / 2 if opposite else limit))
    if found := _SHARE.fullmatch(notation):
        return _checked(Rule(notation, "count", float(found[3]), int(found[1]), int(found[2])))
    if found := _ROW.fullmatch(notation):
        return _checked(Rule(notation, "count", float(found[2]), int(found[1]), int(found[1])))
    if found := _SIDE.fullmatch(notation):
        return _checked(Rule(notation, "count", 0.0, int(found[1]), int(found[1])))
    raise ValueError(f"control rule {text!r} is not understood; understood are {UNDERSTOOD}")


def _checked(rule: Rule) -> Rule:
    fewest = 2 if rule.notation.endswith("x") else 1
    if rule.kind == "count" and not fewest <= rule.needed <= rule.window <= LONGEST:
        wanted = f"a count from {fewest} to {LONGEST}, and not more measurements beyond the limit than are looked at"
        raise ValueError(f"control rule {rule.notation!r} makes no sense: expected {wanted}")
    if rule.limit == 0 and not rule.notation.endswith("x"):
        raise ValueError(
            f"control rule {rule.notation!r} has a limit of 0 SD: expected one above 0 (the same side of the mean is written kx, as in 10x)"
        )
    return rule


@dataclass(frozen=True, slots=True)
class Rules:
    """The rules of a control procedure; an event is rejected if any of them is met.

    Attributes
    ----------
    rules
        In any order.
    scope
        How far the count rules look. "across" (common practice): within and across events and levels, that is, along the sequence of
        all measurements in order of time (levels in order, repeats of a level together) and along each level's own sequence; a pattern
        counts when the newest event completes it. "event": only patterns wholly within one event, as in the published tables of
        rejection probabilities. Range rules always look at one event.
    """

    rules: tuple[Rule, ...]
    scope: Literal["across", "event"] = "across"

    @classmethod
    def parse(cls, notations: Iterable[str], scope: Literal["across", "event"] = "across") -> "Rules":
        """Rules from their trade notations.

        Examples
        --------
        >>> [rule.kind for rule in Rules.parse(["1-3s", "2-2s", "R-4s"]).rules]
        ['count', 'count', 'range']
        """
        return cls(tuple(parse_rule(notation) for notation in notations), scope)

    @property
    def counts(self) -> tuple[Rule, ...]:
        """The count rules that look at more than one measurement."""
        return tuple(rule for rule in self.rules if rule.kind == "count" and rule.needed > 1)

    @property
    def outer(self) -> float:
        """Distance from the mean, in SD, beyond which a single measurement rejects."""
        return min(
            (rule.limit for rule in self.rules if rule.kind == "count" and rule.needed == 1), default=float("inf")
        )

    @property
    def spread(self) -> float:
        """Range of one event, in SD, above which it is rejected."""
        return min((rule.limit for rule in self.rules if rule.kind == "range"), default=float("inf"))

    @property
    def opposite(self) -> float:
        """Distance, in SD, that measurements of one event may not exceed on both sides."""
        return min((rule.limit for rule in self.rules if rule.kind == "opposite"), default=float("inf"))

    @property
    def one_event_only(self) -> bool:
        """Whether the rules look at one event only, so that events pass or fail independently."""
        return self.scope == "event" or not self.counts
