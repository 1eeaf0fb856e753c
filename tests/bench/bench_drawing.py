"""How long the chart takes to draw from a cold start with measurements at hand, beside an empty page.

Each time is a fresh Python: it starts, imports, reads measurements.json, draws and writes one PDF. The empty
page is matplotlib's own, with one word on it. Both wall-clock time and processor time are medians; the ratio
is of processor times, which another program on the machine disturbs less.
"""

import os
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from statistics import median
from tempfile import TemporaryDirectory
from time import perf_counter

from bench.tables import table
from surveys import heron, sixty_entries

from fluteprobe.results import write_results
from fluteprobe.survey import Survey

RUNS = 7
EMPTY = """
from matplotlib import rcParams
from matplotlib.figure import Figure
rcParams["pdf.fonttype"] = 42
page = Figure(figsize=(8.27, 11.69))
page.text(0.5, 0.5, "empty")
page.savefig("page.pdf")
"""
CHART = """
from pathlib import Path
from fluteprobe.pages.chart import write_chart
from fluteprobe.results import read_results
write_chart(read_results(Path("measurements.json")), Path("page.pdf"), paper={paper!r})
"""

Say = Callable[[str], None]
Times = tuple[float, float]


def report(*, full: bool, say: Say) -> None:
    """Time the pages and say a table of them."""
    runs = RUNS if full else 2
    empty = _timed(EMPTY, None, runs)
    rows = [_row("an empty page", empty, empty)]
    for name, survey, paper in (
        ("22 entries, A4", heron(), "a4"),
        ("22 entries, A6 card", heron(), "a6"),
        ("60 entries, A4, three pages", sixty_entries(), "a4"),
    ):
        rows.append(_row(name, _timed(CHART.format(paper=paper), survey, runs), empty))
    say(table(("Page, cold start", "wall s", "processor s", "ratio to empty"), rows))


def _row(name: str, times: Times, empty: Times) -> tuple[str, ...]:
    return (name, f"{times[0]:.2f}", f"{times[1]:.2f}", f"{times[1] / empty[1]:.1f}")


def _timed(program: str, survey: Survey | None, runs: int) -> Times:
    """Return the medians of wall-clock and processor time of a fresh Python that runs the program."""
    with TemporaryDirectory() as folder:
        if survey is not None:
            write_results(survey, Path(folder))
        pairs = [_once(program, Path(folder)) for _ in range(runs + 1)][1:]  # the first warms the disk
    return median(wall for wall, _ in pairs), median(processor for _, processor in pairs)


def _once(program: str, folder: Path) -> Times:
    before, start = os.times(), perf_counter()
    subprocess.run([sys.executable, "-c", program], cwd=folder, check=True)
    wall, after = perf_counter() - start, os.times()
    spent = after.children_user + after.children_system - before.children_user - before.children_system
    return wall, spent
