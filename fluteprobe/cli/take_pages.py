"""A page for each take: drawn for `hear --page` and `measure --pages`, with the second opinion if asked for.

Conventions: a page is named after its recording. One that cannot be read any more becomes a problem, and all
others are drawn.
"""

from collections.abc import Sequence
from itertools import count
from pathlib import Path
from typing import TYPE_CHECKING

from fluteprobe.cli.second import SLOW, Opinions

if TYPE_CHECKING:
    from fluteprobe.session import Problem
    from fluteprobe.sound.recording import Recording
    from fluteprobe.sound.second import SecondOpinion
    from fluteprobe.sound.view import TakeView
    from fluteprobe.survey import Reading

Heard = Sequence[tuple[Path, Sequence["Reading"]]]


def draw_pages(heard: Heard, folder: Path, paper: str, second: bool) -> tuple[Opinions, list["Problem"]]:
    """Draw a page for each recording, given with what was heard in it, and say what was written.

    Also returns the second opinion on each reading in turn, None where there is none, and what could not be
    drawn.
    """
    from fluteprobe.cli import screen
    from fluteprobe.files import make_folder, sweep_passing
    from fluteprobe.pages.take import write_take
    from fluteprobe.session import Problem
    from fluteprobe.sound.recording import RecordingError, open_recording

    opinions: list[SecondOpinion | None] = []
    problems: list[Problem] = []
    taken: set[str] = set()
    if second:
        screen.say(SLOW, err=True)
    make_folder(folder)
    sweep_passing(folder)
    for path, readings in heard:
        try:
            view = _looked_at(open_recording(path), readings, second)
        except RecordingError as error:
            problems.append(Problem(take=readings[0].take, message=str(error)))
            opinions += [None] * len(readings)
            continue
        opinions += [part.second.opinion if part.second else None for part in view.tones]
        target = folder / f"{_page_name(path, taken)}.pdf"
        screen.tell_written(write_take(view, readings, target, paper=paper))
    return opinions, problems


def _looked_at(recording: "Recording", readings: Sequence["Reading"], second: bool) -> "TakeView":
    """Return what a page shows; without librosa's opinion where it cannot be had."""
    from fluteprobe.cli import screen
    from fluteprobe.session import printable
    from fluteprobe.sound.second import SecondOpinionError
    from fluteprobe.sound.view import look

    tones = [reading.tone for reading in readings]
    try:
        return look(recording, tones, second=second)
    except SecondOpinionError as error:
        screen.say(f"Caution: {printable(readings[0].take)}: {printable(str(error))}", err=True)
        return look(recording, tones)


def _page_name(path: Path, taken: set[str]) -> str:
    """Return a recording's name without its ending, numbered on where another file has it too."""
    names = (path.stem if number == 1 else f"{path.stem}_{number}" for number in count(1))
    name = next(name for name in names if name.lower() not in taken)
    taken.add(name.lower())
    return name
