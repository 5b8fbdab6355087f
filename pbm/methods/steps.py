"""The step in which results are reported, found in the results themselves.

The greatest of the steps 1, 2, 5 times a power of ten of which nearly all distinct-valued results are multiples. Results converted from
another unit have no such step and show the decimals that they are printed with.
"""

import numpy as np

from pbm.methods.jit import Floats

NEARLY_ALL = 0.999
FEWEST_VALUES = 5
SMALLEST_POWER = -8
_ROUNDING = 1e-4  # of a step: a decimal number is not exact in binary


def reported_step(x: Floats) -> float | None:
    """The step of results x (n,) that are not censored; None with fewer than five different values, or if no step fits.

    Examples
    --------
    >>> reported_step(np.array([1.2, 3.4, 1.7, 2.1, 9.9, 5.0])), reported_step(np.array([135.0, 140, 145, 150, 155]))
    (0.1, 5.0)
    """
    values, counts = np.unique(x[np.isfinite(x)], return_counts=True)
    if len(values) < FEWEST_VALUES:
        return None
    top = int(np.ceil(np.log10(np.abs(values).max())))
    wanted = NEARLY_ALL * counts.sum()
    for power in range(top, SMALLEST_POWER - 1, -1):
        for digit in (5, 2, 1):
            step = float(f"{digit}e{power}")
            if counts[_is_multiple(values, step)].sum() >= wanted:
                return step
    return None


def quantiles_within_steps(x: Floats, step: float, q: Floats) -> Floats:
    """Quantiles of results x (n,) spread evenly over the cell of values that round to each.

    Examples
    --------
    >>> quantiles_within_steps(np.array([1.0, 1.0, 2.0, 3.0]), 1.0, np.array([0.25, 0.5, 0.75])).tolist()
    [1.0, 1.5, 2.5]
    """
    values, counts = np.unique(x, return_counts=True)
    so_far = np.cumsum(counts) / len(x)
    share = np.column_stack([so_far - counts / len(x), so_far]).ravel()
    edges = np.column_stack([values - step / 2, values + step / 2]).ravel()
    return np.asarray(np.interp(q, share, edges), dtype=np.float64)


def _is_multiple(values: Floats, step: float) -> np.ndarray[tuple[int], np.dtype[np.bool_]]:
    ratio = values / step
    fits: np.ndarray[tuple[int], np.dtype[np.bool_]] = np.abs(ratio - np.rint(ratio)) < _ROUNDING + 1e-12 * np.abs(
        ratio
    )
    return fits
