"""The published figures as they were printed, one module a method."""


def lines(table: str) -> list[tuple[str, ...]]:
    """Cells of each line of a table, stripped."""
    return [tuple(cell.strip() for cell in line.split("|")) for line in table.strip().splitlines()]
