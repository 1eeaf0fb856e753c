"""Tables for a terminal: column under column."""

from collections.abc import Collection, Sequence


def aligned(table: Sequence[Sequence[str]], numbers: Collection[int] = ()) -> list[str]:
    """Return rows as lines, the columns of `numbers` to the right; empty columns fall out, nothing is cut."""
    widths = [max(map(len, column)) for column in zip(*table, strict=True)]
    return [
        "  ".join(
            cell.rjust(width) if k in numbers else cell.ljust(width)
            for k, (cell, width) in enumerate(zip(row, widths, strict=True))
            if width
        ).rstrip()
        for row in table
    ]
