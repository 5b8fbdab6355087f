"""Numbers as they are written down: rounded to so many significant digits, so that the last bit of a sum decides nothing."""


def significant(x: float, digits: int) -> float:
    """The nearest number of so many significant digits.

    Examples
    --------
    >>> significant(0.0123456, 4), significant(-98765.0, 2)
    (0.01235, -99000.0)
    """
    return float(f"{x:.{digits}g}")
