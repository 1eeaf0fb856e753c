"""How comparing grows with the number of sessions, and how often its verdicts and numbers are right.

Growth: every session has 30 takes with all that was measured of them (those of the demo flute, its entries
moved at random). `read`, `compare`, `write` (JSON and CSV as text) and `page` are times in one warm process;
`command` is a fresh Python that runs `fluteprobe compare`, from its start to its end.

Verdicts: classes of twelve flutes by construction. Half of them are alike; each of the others is 12 cents
off at three of ten notes; uncertainties are 0.6 to 1.4 cents. `called` is how many of the true differences
over three combined standard uncertainties were called, and `chance` how many of the notes that do not differ;
`sure` are those called different, and `false` is how many of these do not differ.

`A4` is the error of the best A4, of 12 flutes that are off by 4 cents (standard deviation) at each note, and
`in 2u` how often it was within twice its uncertainty.
"""

import os
import subprocess
import sys
from collections.abc import Callable, Sequence
from dataclasses import replace
from pathlib import Path
from tempfile import TemporaryDirectory
from time import perf_counter

import numpy as np
from bench.tables import share_text, table
from classes import KEYS, flute

from fluteprobe.compare import compare
from fluteprobe.compare.contract import comparison_csv, comparison_json
from fluteprobe.compare.statistics import SURE
from fluteprobe.pages.comparison import write_comparison
from fluteprobe.results import json_text, read_results, write_results
from fluteprobe.survey import Survey

REPORTS = Path(__file__).resolve().parent.parent.parent / "reports"
TAKES = 30
COMMAND = "from fluteprobe.cli.main import main; main()"

Say = Callable[[str], None]


def report(*, full: bool, say: Say) -> None:
    """Say both tables."""
    sizes = (2, 10, 30, 100, 200) if full else (2, 10)
    titles = (
        "sessions",
        "read s",
        "compare s",
        "write s",
        "page s",
        "command s",
        "processor s",
        "ms a session",
    )
    say(table(titles, [_growth(size) for size in sizes]))
    say(_verdicts(200 if full else 10))
    say(_pitches(1000 if full else 20))


def _growth(size: int) -> Sequence[str]:
    with TemporaryDirectory() as where:
        paths = [Path(where) / f"{k:03d}" for k in range(size)]
        for k, path in enumerate(paths):
            write_results(_session(k), path)
        start = perf_counter()
        surveys = [read_results(path / "measurements.json") for path in paths]
        read = perf_counter()
        comparison = compare(surveys)
        compared = perf_counter()
        json_text(comparison_json(comparison))
        comparison_csv(comparison)
        written = perf_counter()
        write_comparison(comparison, Path(where) / "page.pdf")
        drawn = perf_counter()
        wall, processor = _command(paths, Path(where))
    laps = np.diff([start, read, compared, written, drawn])
    each = 1000.0 * wall / size
    return (
        str(size), *(f"{lap:.3f}" for lap in laps), f"{wall:.2f}", f"{processor:.2f}", f"{each:.0f}"
    )  # fmt: skip


def _session(seed: int) -> Survey:
    """Return a session of TAKES takes: the demo flute's, its pitches moved at random."""
    chances = np.random.default_rng(seed)
    demo = read_results(REPORTS / "heron" / "measurements.json")
    readings = (demo.readings * (TAKES // len(demo.readings) + 1))[:TAKES]
    entries = tuple(
        replace(
            entry, frequency_hz=entry.frequency_hz * 2.0 ** (chances.normal(0.0, 5.0) / 1200.0), cents=0.0
        )
        for entry in demo.entries
    )
    facts = replace(demo.flute, name=f"Flute {seed}", serial=str(seed))
    return replace(demo, flute=facts, readings=readings, entries=entries)


def _command(paths: Sequence[Path], where: Path) -> tuple[float, float]:
    """Return wall-clock and processor time of the command in a fresh Python, its second run."""
    words = [sys.executable, "-c", COMMAND, "compare", *(str(path) for path in paths)]
    for _ in range(2):
        before, start = os.times(), perf_counter()
        subprocess.run(words, cwd=where, check=True, capture_output=True)
        wall, after = perf_counter() - start, os.times()
    spent = after.children_user + after.children_system - before.children_user - before.children_system
    return wall, spent


def _verdicts(classes: int) -> str:
    counts = np.zeros(6, dtype=np.int64)
    for seed in range(classes):
        counts += _class_of_twelve(np.random.default_rng([seed, 12]))
    beyond, called, same, chance, sure, false = (int(count) for count in counts)
    titles = ("classes of twelve", "true, over 3u", "called", "alike", "chance", "sure", "false")
    row = (str(classes), str(beyond), share_text(called, beyond), str(same), share_text(chance, same),
           str(sure), share_text(false, sure))  # fmt: skip
    return table(titles, [row])


def _class_of_twelve(chances: np.random.Generator) -> "np.ndarray[tuple[int], np.dtype[np.int64]]":
    truth = np.zeros((len(KEYS), 12))
    for k in range(6, 12):
        truth[chances.choice(len(KEYS), 3, replace=False), k] = chances.choice([-12.0, 12.0], 3)
    doubts = chances.uniform(0.6, 1.4, truth.shape)
    heard = truth + chances.normal(0.0, doubts)
    surveys = [
        flute(f"Flute {k}", list(heard[:, k]), list(doubts[:, k]), air_temperature_c=20.0) for k in range(12)
    ]
    counts = np.zeros(6, dtype=np.int64)
    for pair in compare(surveys).pairs:
        a, b = pair.flutes
        for d in pair.differences:
            true = truth[d.row, a] != truth[d.row, b]
            beyond = abs(d.cents) > SURE * d.uncertainty_cents
            sure = d.verdict == "different"
            counts += np.array(
                [true and beyond, true and beyond and d.verdict is not None, not true,
                 not true and d.verdict is not None, sure, sure and not true]
            )  # fmt: skip
    return counts


def _pitches(groups: int) -> str:
    chances = np.random.default_rng(440)
    errors, scores = [], []
    for _ in range(groups):
        surveys = [flute(f"Flute {k}", list(chances.normal(0.0, 4.0, len(KEYS)))) for k in range(12)]
        group = compare(surveys).group
        assert group is not None
        errors.append(group.a4_hz - 440.0)
        scores.append(abs(group.a4_hz - 440.0) <= 2.0 * group.uncertainty_hz)
    rms = float(np.sqrt(np.mean(np.square(errors))))
    inside = share_text(int(np.sum(np.abs(errors) < 0.2)), groups)
    row = (str(groups), f"{rms:.3f}", inside, share_text(int(np.sum(scores)), groups))
    return table(("groups of twelve", "A4 rms Hz", "within 0.2 Hz", "in 2u"), [row])
