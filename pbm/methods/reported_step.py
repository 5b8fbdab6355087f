"""The step in which a method reports: its multiples, as the numbers that people write.

58 steps of 0.1 are 5.8; the product in binary is 5.800000000000001, which is no result anybody reported and lies outside a limit of 5.8.
"""

from decimal import Decimal
from functools import cache

import numpy as np

from pbm.methods.jit import Floats


@cache
def decimals(step: float) -> int:
    """Decimal places of a step.

    Examples
    --------
    >>> decimals(0.05), decimals(1.0), decimals(20.0), decimals(2.5)
    (2, 0, 0, 1)
    """
    exponent = Decimal(repr(step)).normalize().as_tuple().exponent
    return max(0, -exponent) if isinstance(exponent, int) else 0


def multiples(count: Floats, step: float) -> Floats:
    """`count` steps each, shape (n,), as the numbers nearest to their decimal text.

    Examples
    --------
    >>> multiples(np.array([58.0, 3.0]), 0.1).tolist(), (np.array([58.0, 3.0]) * 0.1).tolist()
    ([5.8, 0.3], [5.800000000000001, 0.30000000000000004])
    """
    rounded: Floats = np.round(count * step, decimals(step))
    return rounded
