"""`published`: compares a figure of ours with one from outside, and writes the pair down for docs/evidence/published.md.

Rows go, one JSON object a line, to the file named by the environment variable PBM_PUBLISHED_ROWS; without it nothing is written.
"""

import json
import math
import os
from decimal import Decimal
from pathlib import Path

ROWS = "PBM_PUBLISHED_ROWS"


def rounding(printed: str) -> float:
    """Half a unit of the last printed place.

    >>> rounding(".0050"), rounding("121")
    (5e-05, 0.5)
    """
    exponent = Decimal(printed).as_tuple().exponent
    assert isinstance(exponent, int)
    return float(Decimal(5).scaleb(exponent - 1))


def published(quantity: str, source: str, expected: str | float, ours: float, tolerance: float) -> None:
    """Assert that |ours - expected| is within the tolerance, and record the row.

    Parameters
    ----------
    quantity
        What is compared, with its parameters.
    source
        Where the figure comes from.
    expected
        The figure. As text it is taken as printed: half a unit of its last place is allowed on top of the tolerance.
    ours
        The tool's.
    tolerance
        Absolute.
    """
    allowed = tolerance + (rounding(expected) if isinstance(expected, str) else 0.0)
    if path := os.environ.get(ROWS):
        row = {
            "test": os.environ["PYTEST_CURRENT_TEST"].rsplit(" ", 1)[0],
            "quantity": quantity,
            "source": source,
            "published": expected if isinstance(expected, str) else f"{expected:.10g}",
            "ours": float(ours),
            "tolerance": allowed,
        }
        with Path(path).open("a") as rows:
            rows.write(json.dumps(row) + "\n")
    # A hair is left for the rounding of the comparison itself.
    assert math.isfinite(ours) and abs(ours - float(expected)) <= allowed * (1 + 1e-9), (
        f"{quantity}: ours {ours:.10g}, published {expected}, allowed +-{allowed:.3g}"
    )
