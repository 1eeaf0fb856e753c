"""Faults: what is kept when a run is killed, the disk is full, recordings are damaged, several run at once.

Conventions: real commands on five short takes of the demo flute, each in a process of its own that is forked
from this one, so that every moment is a moment of work and none goes into loading. The flute's name is
changed before each fault: an output is then the old one or the new one, byte for byte, or it is lost. "Next
run" is a plain run of the same command afterwards, which must end well, write the new outputs and leave
nothing else. Seeds are fixed; moments depend on the machine's speed.
"""

import os
import shutil
import signal
import sys
import time
from collections.abc import Callable, Iterator, Sequence
from contextlib import suppress
from dataclasses import dataclass, field
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np
from bench.harm import (
    DISK_KB,
    TAKES,
    damage,
    digests,
    ended,
    free_bytes,
    kill_before,
    limit_files,
    make_session,
    small_disk,
    whole_recording,
)
from bench.tables import table

from fluteprobe.cli.main import main
from fluteprobe.kept import KEPT_FOLDER, Kept
from fluteprobe.reread import read_results
from fluteprobe.session import read_session

COMMANDS = {"measure": ("measure",), "chart": ("chart", "--format", "svg", "--paper", "a6")}


COLUMNS = ("outputs", "recordings", "kept", "words", "processes", "next_run")
TITLES = (
    "fault", "times", "outputs neither old nor new", "recordings changed", "kept readings spoilt",
    "not told in a line", "processes left behind", "next run not right",
)  # fmt: skip


@dataclass(slots=True)
class Tally:
    """How often a fault was tried, and how often something was lost or otherwise wrong."""

    fault: str
    times: int = 0
    wrong: dict[str, int] = field(default_factory=lambda: dict.fromkeys(COLUMNS, 0))

    def note(self, **wrong: bool) -> None:
        """Count one trial and what went wrong in it."""
        self.times += 1
        for column, is_wrong in wrong.items():
            self.wrong[column] += is_wrong


def report(*, full: bool, say: Callable[[str], None]) -> None:
    """Print what was lost under every fault."""
    import fluteprobe.pages.chart
    import fluteprobe.pages.map  # noqa: F401  (loaded once, before all forks)

    share = 1.0 if full else 0.05
    with TemporaryDirectory() as name:
        bench = Bench(Path(name))
        tallies = [
            killed_at_random(bench, "measure", round(200 * share)),
            killed_at_random(bench, "chart", round(100 * share)),
            *(killed_at_every_operation(bench, command, 1 if full else 10) for command in COMMANDS),
            taken_away(bench, round(40 * share)),
            *(at_once(bench, count, round(40 * share)) for count in (2, 4)),
            *full_disks(bench, 16 if full else 128),
            limited(bench, 40 if full else 4),
        ]
        say(table(TITLES, [_row(tally) for tally in tallies]))
        say(damaged(bench, 300 if full else 20))


class Bench:
    """A session, its old outputs and its new ones, to be spoilt time and again."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self.session = folder / "flute"
        self.out = folder / "out"
        self.words = folder / "words"
        make_session(self.session)
        self.old, self.new = self._outputs("Old"), self._outputs("New")
        self.recordings = digests(self.session / "takes")
        self.kept = len(TAKES)

    def _outputs(self, name: str) -> dict[str, bytes]:
        """Return what every command writes for a flute of that name."""
        facts = self.session / "flute.toml"
        facts.write_text(f'[flute]\nname = "{name}"\nholes = 6\n', "utf-8")
        for command in COMMANDS:
            self.wait(self.start(command))
        found = {path.name: path.read_bytes() for path in self.out.iterdir() if path.is_file()}
        shutil.rmtree(self.out)
        return found

    def reset(self, out: Path | None = None, *, warm: bool = False) -> None:
        """Put the old outputs into place, and keep nothing of what was heard unless `warm`."""
        out = out or self.out
        out.mkdir(exist_ok=True)
        for path in out.iterdir():
            if path.is_file():
                path.unlink()
            elif not warm:
                shutil.rmtree(path)
        for name, content in self.old.items():
            (out / name).write_bytes(content)

    def start(self, command: str, out: Path | None = None, before: Callable[[], None] | None = None) -> int:
        """Start a command in a process group of its own and return its number."""
        words = [*COMMANDS[command], str(self.session), "--out", str(out or self.out)]
        sys.stdout.flush()
        number = os.fork()
        if number:
            return number
        with suppress(BaseException):
            self._run(words, before)
        os._exit(99)

    def _run(self, words: list[str], before: Callable[[], None] | None) -> None:
        """Run a command in this process and end it."""
        os.setsid()
        written = os.open(self.words, os.O_WRONLY | os.O_CREAT | os.O_APPEND)
        for descriptor in (1, 2):
            os.dup2(written, descriptor)
        try:
            if before is not None:
                before()
            main(words)
        except SystemExit as end:
            sys.stdout.flush()
            sys.stderr.flush()
            os._exit(int(end.code or 0))
        except BaseException:
            import traceback

            traceback.print_exc()
            sys.stderr.flush()

    def wait(self, number: int) -> int:
        """Wait for a command to end and return its exit code, below zero for a signal."""
        return os.waitstatus_to_exitcode(os.waitpid(number, 0)[1])

    def said(self) -> str:
        """Return what was said since this was last asked."""
        text = self.words.read_text("utf-8", "replace") if self.words.exists() else ""
        self.words.unlink(missing_ok=True)
        return text

    def check(
        self, tally: Tally, group: int, command: str, out: Path | None = None, *, right: bool = True
    ) -> None:
        """Look at everything after a fault, then at the next run, and count what is wrong."""
        out = out or self.out
        left = not ended(group)
        words = self.said()
        spoilt = self._spoilt(out)
        recordings = digests(self.session / "takes") != self.recordings
        lost = [
            name
            for name, content in self.old.items()
            if (out / name).read_bytes() not in {content, self.new[name]}
        ]
        code = self.wait(self.start(command, out))
        more = self.said()
        wanted = (
            self.new
            if command == "chart"
            else {k: v for k, v in self.new.items() if k.endswith(("json", "csv"))}
        )
        done = {name: (out / name).read_bytes() for name in wanted} == wanted
        strays = [path for path in out.rglob("*.tmp") if "fluteprobe" in path.name]
        tally.note(
            outputs=bool(lost),
            recordings=recordings,
            kept=spoilt,
            words="Traceback" in words + more or not right,
            processes=left,
            next_run=code != 0 or not done or bool(strays),
        )

    def _spoilt(self, out: Path) -> bool:
        """Whether something kept cannot be read again, or is not what hearing anew gives."""
        folder = out / KEPT_FOLDER
        files = list(folder.glob("[0-9a-f]*.json")) if folder.exists() else []
        takes = [take.path for take in read_session(self.session).takes]
        return len(Kept(folder=folder).found(takes)) != len(files)


# --- faults ------------------------------------------------------------------------------------------


def killed_at_random(bench: Bench, command: str, times: int) -> Tally:
    """Kill -9 at random moments between the start and the end of the work; every other time with all kept."""
    tally = Tally(f"kill -9 at a random moment of `{command}`")
    rng = np.random.default_rng(9)
    lasts = {warm: _seconds(bench, command, warm=warm) for warm in (False, True)}
    for k in range(times):
        warm = k % 2 == 1
        bench.reset(warm=warm)
        number = bench.start(command)
        time.sleep(rng.uniform(0.0, lasts[warm]))
        with suppress(ProcessLookupError):
            os.kill(number, signal.SIGKILL)
        bench.wait(number)
        bench.check(tally, number, command)
    return tally


def killed_at_every_operation(bench: Bench, command: str, step: int) -> Tally:
    """Kill -9 just before the 1st, 2nd, … operation on a file of the outputs, until there are no more."""
    tally = Tally(f"kill -9 before each operation of `{command}` on a file")
    turn = 1
    while True:
        bench.reset()
        number = bench.start(command, before=lambda: kill_before(turn, bench.out))  # noqa: B023  (run at once)
        code = bench.wait(number)
        if code >= 0:
            return tally
        bench.check(tally, number, command)
        turn += step


def taken_away(bench: Bench, times: int) -> Tally:
    """Take the recordings away at a random moment, as when a drive is removed."""
    tally = Tally("recordings taken away at a random moment")
    rng = np.random.default_rng(10)
    lasts = _seconds(bench, "measure", warm=False)
    takes, elsewhere = bench.session / "takes", bench.folder / "elsewhere"
    for _ in range(times):
        bench.reset()
        number = bench.start("measure")
        time.sleep(rng.uniform(0.0, lasts))
        takes.rename(elsewhere)
        code = bench.wait(number)
        elsewhere.rename(takes)
        said = bench.words.read_text("utf-8") if bench.words.exists() else ""
        one_line = sum(line.startswith("Error: ") for line in said.splitlines()) == 1
        bench.check(tally, number, "measure", right=code == 0 or (code == 1 and one_line))
    return tally


def at_once(bench: Bench, count: int, times: int) -> Tally:
    """Start several runs on one session within a moment; all must end well."""
    tally = Tally(f"{count} runs at once")
    rng = np.random.default_rng(11)
    for k in range(times):
        bench.reset(warm=k % 4 == 3)
        numbers = []
        for n in range(count):
            numbers.append(bench.start("chart" if n % 2 else "measure"))
            time.sleep(rng.uniform(0.0, 0.1))
        codes = [bench.wait(number) for number in numbers]
        bench.check(tally, numbers[0], "chart", right=codes == [0] * count)
    return tally


def full_disks(bench: Bench, step_kb: int) -> Iterator[Tally]:
    """Run on a small disk in memory with more and more room left, where the machine lets us make one."""
    tally = Tally("disk full, more and more left")
    disk = bench.folder / "disk"
    with small_disk(disk) as is_there:
        for left_kb in range(0, DISK_KB, step_kb) if is_there else ():
            out = disk / "out"
            bench.reset(out)
            ballast = disk / "ballast"
            with ballast.open("wb") as file, suppress(OSError):
                os.posix_fallocate(file.fileno(), 0, max(free_bytes(disk) - left_kb * 1024, 1))
            number = bench.start("chart", out)
            right = _is_told_in_one_line(bench, bench.wait(number), "the disk is full")
            ballast.unlink()
            bench.check(tally, number, "chart", out, right=right)
            shutil.rmtree(out)
    if tally.times:
        yield tally


def limited(bench: Bench, times: int) -> Tally:
    """Run under a limit on the size of files, from less to more than is needed."""
    tally = Tally("files may not grow beyond 4 to 60 KB")
    for limit in np.linspace(4_000, 60_000, times).astype(int):
        bench.reset()
        number = bench.start("chart", before=lambda: limit_files(int(limit)))  # noqa: B023  (run at once)
        right = _is_told_in_one_line(bench, bench.wait(number), "files may not grow so large here")
        bench.check(tally, number, "chart", right=right)
    return tally


def damaged(bench: Bench, count: int) -> str:
    """Return what becomes of damaged recordings by the hundred among the good ones."""
    alone = read_after(bench)
    rng = np.random.default_rng(12)
    takes = bench.session / "takes"
    for k in range(count):
        (takes / f"xxxxxx-{k + 2}.wav").write_bytes(damage(whole_recording(k), k, rng))
    bench.reset()
    start = time.perf_counter()
    code = bench.wait(bench.start("measure"))
    seconds = time.perf_counter() - start
    words = bench.said()
    survey = read_results(bench.out / "measurements.json")
    pitches = {r.take: r.tone.frequency_hz for r in survey.readings}
    kept_right = sum(pitches.get(take) == pitch for take, pitch in alone.items())
    named = {problem.take for problem in survey.problems}
    dealt_with = sum(f"takes/xxxxxx-{k + 2}.wav" in named | set(pitches) for k in range(count))
    row = [
        f"{count} damaged among {len(alone)} good",
        f"{kept_right} of {len(alone)}",
        f"{dealt_with} of {count}",
        str(len(named)),
        str(words.count("Traceback")),
        str(code),
        f"{seconds:.1f}",
    ]
    titles = ["recordings", "good ones read as before", "damaged ones measured or named", "named as unusable",
              "tracebacks", "exit code", "s"]  # fmt: skip
    return table(titles, [row])


def read_after(bench: Bench) -> dict[str, float | None]:
    """Return the pitch of every good take."""
    bench.reset()
    bench.wait(bench.start("measure"))
    bench.said()
    return {r.take: r.tone.frequency_hz for r in read_results(bench.out / "measurements.json").readings}


# --- means -------------------------------------------------------------------------------------------


def _seconds(bench: Bench, command: str, *, warm: bool) -> float:
    """Return how long a command takes, so that moments are spread over all of it."""
    taken = []
    for _ in range(3):
        bench.reset(warm=warm)
        start = time.perf_counter()
        bench.wait(bench.start(command))
        taken.append(time.perf_counter() - start)
    bench.said()
    return max(taken)


def _is_told_in_one_line(bench: Bench, code: int, words: str) -> bool:
    """Whether a run ended well, or with exit code 1 and one line that says what is wrong."""
    said = bench.words.read_text("utf-8", "replace") if bench.words.exists() else ""
    errors = [line for line in said.splitlines() if line.startswith("Error: ")]
    return code == 0 or (
        code == 1 and len(errors) == 1 and words in errors[0] and str(bench.folder) in errors[0]
    )


def _row(tally: Tally) -> Sequence[str]:
    return [tally.fault, str(tally.times), *(str(tally.wrong[column]) for column in COLUMNS)]
