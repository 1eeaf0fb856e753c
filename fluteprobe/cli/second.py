"""The second opinion on request: asked for every tone, told on screen, added to the JSON.

Conventions: one opinion for each reading, None where nothing sounds. Where librosa cannot be asked, one line
says so and the measurements stand without it.
"""

from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any, TypeVar

import click

if TYPE_CHECKING:
    from fluteprobe.sound.second import SecondOpinion
    from fluteprobe.survey import Reading

Command = TypeVar("Command", bound=Callable[..., Any])
Opinions = Sequence["SecondOpinion | None"]

SLOW = "Second opinion: pYIN reads every tone too; the first run compiles, about 15 s"


def second_option(command: Command) -> Command:
    """Add `--second-opinion`."""
    return click.option(
        "--second-opinion",
        "second",
        is_flag=True,
        help="Have pYIN read every tone too, and say where it differs by more than its scatter.",
    )(command)


def asked(heard: Sequence[tuple[Path, "Reading"]]) -> Opinions | None:
    """Ask about every tone, given with its recording's path; None, with one line on stderr, if that fails."""
    from fluteprobe.cli import screen
    from fluteprobe.session import printable
    from fluteprobe.sound.second import SecondOpinionError

    screen.say(SLOW, err=True)
    opinions: list[SecondOpinion | None] = []
    try:
        with screen.progress("Second opinion") as on_tone:
            for path, reading in heard:
                opinions.append(_asked_one(path, reading))
                on_tone(len(opinions), len(heard))
    except SecondOpinionError as error:
        screen.say(f"No second opinion: {printable(str(error))}", err=True)
        return None
    return opinions


def told(readings: Sequence["Reading"], opinions: Opinions) -> str:
    """Return on how many tones the two agree, and a line for each on which they differ."""
    pairs = [(r, o) for r, o in zip(readings, opinions, strict=True) if o is not None]
    apart = [_difference(reading, opinion) for reading, opinion in pairs if opinion.differs]
    agreed = len(pairs) - len(apart)
    return "\n".join([f"Second opinion: pYIN agrees on {agreed} of {len(pairs)} tones", *apart])


def with_opinions(values: Mapping[str, Any], opinions: Opinions) -> dict[str, Any]:
    """Return the JSON values with the field `second_opinion` added to every tone."""
    tones = [
        {**tone, "second_opinion": None if opinion is None else _json(opinion)}
        for tone, opinion in zip(values["tones"], opinions, strict=True)
    ]
    return {**values, "tones": tones}


def _asked_one(path: Path, reading: "Reading") -> "SecondOpinion | None":
    from fluteprobe.sound.recording import RecordingError, open_recording
    from fluteprobe.sound.second import second_opinion

    tone = reading.tone
    if tone.frequency_hz is None:
        return None
    try:
        recording = open_recording(path)
        stop = min(round(tone.end_s * recording.rate_hz), recording.frames)
        samples = recording.read(round(tone.start_s * recording.rate_hz), stop)
    except RecordingError:  # it was there a moment ago
        return None
    return second_opinion(samples, recording.rate_hz, tone.frequency_hz)


def _difference(reading: "Reading", opinion: "SecondOpinion") -> str:
    from fluteprobe.session import printable

    tone = reading.tone
    place = f"  {printable(reading.take)}, {tone.start_s:.2f}–{tone.end_s:.2f} s: pYIN hears"
    if opinion.frequency_hz is None or opinion.difference_cents is None:
        return f"{place} no pitch, we {tone.frequency_hz:.2f} Hz"
    side = "above" if opinion.difference_cents > 0.0 else "below"
    apart = opinion.interval or (
        f"{abs(opinion.difference_cents):.0f} cents {side} (its scatter is {opinion.scatter_cents:.0f}),"
    )
    return f"{place} {opinion.frequency_hz:.2f} Hz, {apart} our {tone.frequency_hz:.2f} Hz"


def _json(opinion: "SecondOpinion") -> dict[str, Any]:
    def rounded(value: float | None, digits: int) -> float | None:
        return None if value is None else round(value, digits)

    return {
        "reader": "pYIN",
        "frequency_hz": rounded(opinion.frequency_hz, 4),
        "scatter_cents": rounded(opinion.scatter_cents, 2),
        "difference_cents": rounded(opinion.difference_cents, 2),
        "share": round(opinion.share, 3),
        "differs": opinion.differs,
        "interval": opinion.interval,
    }
