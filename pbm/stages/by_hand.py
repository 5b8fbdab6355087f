"""What a person sets of a monitor; the rest is chosen as ever."""

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

from pbm.errors import InputError
from pbm.methods.candidates import FAMILIES, Candidate, Family, candidates
from pbm.methods.chain import Preparation
from pbm.methods.statistics import STATISTICS
from pbm.records.plan import Admit


@dataclass(frozen=True, slots=True)
class ByHand:
    """Parts of a monitor that are not searched for; None where they are.

    Attributes
    ----------
    admit
        Truncation limits.
    transform
        "none", "log" or "boxcox" (its lambda is still estimated).
    statistic
        A statistic among those that are searched.
    parameter
        Its window, weight or reference.
    baseline
        With (True) or without (False) the patient-mix baseline.
    """

    admit: Admit | None = None
    transform: str | None = None
    statistic: str | None = None
    parameter: float | None = None
    baseline: bool | None = None

    def __post_init__(self) -> None:
        """What is set fits together.

        Raises
        ------
        InputError
            If a statistic is not among those searched, or its parameter stands without it or out of range.
        """
        if self.statistic is not None and self.statistic not in FAMILIES:
            raise InputError(f'"{self.statistic}" is not a statistic that tune chooses among: {", ".join(FAMILIES)}.')
        if self.parameter is not None and self.statistic is None:
            taken = "; ".join(f"{name} takes --{STATISTICS[name].parameter}" for name in FAMILIES)
            raise InputError(f"A weight, a window or a reference goes with --statistic: {taken}.")
        if self.parameter is not None and self.statistic is not None:
            self._check(STATISTICS[self.statistic].parameter, self.parameter)

    def _check(self, name: str, value: float) -> None:
        fits, expected = {
            "weight": (0 < value <= 1, "a weight above 0 and at most 1"),
            "window": (value >= 2 and value == int(value), "a window of at least 2 results"),
            "reference": (0 <= value < 10, "a reference of at least 0 SD and below 10"),
        }[name]
        if not fits:
            raise InputError(f"{self.statistic} takes {expected}, not {value:g}.")

    def among(self, families: Sequence[Family]) -> "ByHand":
        """The same without a statistic that is not among these families: it belongs to the stream's other monitor."""
        if self.statistic in (None, *(family.statistic for family in families)):
            return self
        return replace(self, statistic=None, parameter=None)

    def preparations(self, choices: Sequence[Preparation]) -> list[Preparation]:
        """The choices for truncation and transform that fit.

        Raises
        ------
        InputError
            If the wanted transform is Box-Cox and these results give no lambda for one.
        """
        chosen = [p for p in choices if self.transform in (None, p.transform)]
        if not chosen and self.transform == "log":
            chosen = [replace(p, transform="log") for p in choices if p.transform == "none"]
        if not chosen:
            raise InputError(
                "These results are not skewed, or not all above 0: no Box-Cox transform is estimated for them."
            )
        if self.admit is not None:
            low = -math.inf if self.admit.low is None else self.admit.low
            high = math.inf if self.admit.high is None else self.admit.high
            winsorize = self.admit.mode == "winsorize"
            chosen = list(dict.fromkeys(replace(p, low=low, high=high, winsorize=winsorize) for p in chosen))
        return chosen

    def candidates(self, of: Sequence[Preparation], longest: int, families: Sequence[Family]) -> list[Candidate]:
        """The candidates that fit, of these families of statistics."""
        chosen = [family for family in families if self.statistic in (None, family.statistic)]
        if self.parameter is not None:
            return [
                Candidate(p, family.statistic, self.parameter, more)
                for p in of
                for family in chosen
                for more in family.more
            ]
        return list(candidates(of, longest, chosen))


NOTHING_BY_HAND = ByHand()
