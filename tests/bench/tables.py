"""Tables of the benchmarks: aligned, in Markdown, with the date and the versions that they were made with."""

import platform
from collections.abc import Sequence
from datetime import date
from importlib.metadata import version
from math import isnan
from os import cpu_count

VERSIONS_OF = ("numpy", "soundfile", "librosa", "numba", "praat-parselmouth")


def table(titles: Sequence[str], rows: Sequence[Sequence[str]]) -> str:
    """Return an aligned Markdown table, the first column to the left, the others to the right."""
    widths = [max(len(row[k]) for row in (titles, *rows)) for k in range(len(titles))]
    ruler = [f"{'-' * (width - 1)}{'-' if k == 0 else ':'}" for k, width in enumerate(widths)]

    def line(cells: Sequence[str]) -> str:
        first, *others = [
            cell.rjust(width) if k else cell.ljust(width)
            for k, (cell, width) in enumerate(zip(cells, widths, strict=True))
        ]
        return "| " + " | ".join([first, *others]) + " |"

    return "\n".join([line(titles), line(ruler), *(line(row) for row in rows)])


def made_with() -> str:
    """Return the date, the machine and the versions that the numbers belong to."""
    versions = ", ".join(f"{name} {version(name)}" for name in VERSIONS_OF)
    return f"{date.today().isoformat()}, {cpu_count()} cores, Python {platform.python_version()}, {versions}."


def cents_text(value: float) -> str:
    """Return a number of cents to three digits, a dash where there is none."""
    return "–" if isnan(value) else f"{value:.3g}" if value < 1000.0 else f"{value:.0f}"


def share_text(part: int, whole: int) -> str:
    """Return a share in per cent."""
    return f"{100.0 * part / whole:.1f} %" if whole else "–"
