"""Plain tables for the terminal."""

from collections.abc import Sequence


def table(head: Sequence[str], rows: Sequence[Sequence[str]]) -> str:
    """Columns as wide as their widest cell, two spaces apart; the last column is not padded.

    Examples
    --------
    >>> print(table(["stream", "a day"], [["sodium@line-1", "400"]]))
    stream         a day
    sodium@line-1  400
    """
    lines = [list(head), *(list(row) for row in rows)]
    widths = [max(len(line[i]) for line in lines) for i in range(len(head) - 1)]
    return "\n".join("  ".join([*(c.ljust(w) for c, w in zip(line, widths, strict=False)), line[-1]]) for line in lines)
