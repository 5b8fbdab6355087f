"""The verdict on held-out days, at and around its thresholds."""

import pytest

from pbm.methods.verdict import Gain, Word


@pytest.mark.parametrize(
    ("average", "worst", "beyond", "kept", "word"),
    [
        (0.4, 0.3, 1.0, True, "useful"),
        (0.1, 0.1, 0.001, True, "useful"),
        (0.4, 0.3, 1.0, False, "marginal"),
        (0.4, 0.0, 1.0, True, "marginal"),
        (0.099, 0.3, 1.0, True, "marginal"),
        (0.4, 0.0, 1.0, False, "marginal"),
        (0.099, 0.099, 1.0, True, "not useful here"),
        (0.4, 0.3, 0.0, True, "not useful here"),
        (0.0, 0.0, 0.0, True, "not useful here"),
    ],
)
def test_the_verdict_follows_from_what_is_saved(
    average: float, worst: float, beyond: float, kept: bool, word: Word
) -> None:
    assert Gain(average, worst, beyond, kept).verdict == word
