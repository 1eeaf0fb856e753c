"""`fluteprobe plays`: which scales a flute can play, and whether it can play a tune."""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from fluteprobe.cli.options import A4_HZ, FOLDER, json_option, out_option

if TYPE_CHECKING:
    from fluteprobe.flute.scales import Scale
    from fluteprobe.repertoire.scales import ScaleFit
    from fluteprobe.repertoire.sounds import Compass, Standard
    from fluteprobe.repertoire.tunes import TuneFit
    from fluteprobe.score.tune import Tune
    from fluteprobe.survey import Survey

ALL_TONICS = range(12)


@dataclass(frozen=True, slots=True, kw_only=True)
class Wish:
    """What is asked of every flute."""

    scales: "tuple[Scale, ...]"
    tonics: tuple[int, ...]
    tune: "Tune | None"
    semitones: int | None
    tolerance_cents: float
    a4_hz: float | None
    best_a4: bool

    def standard(self, survey: "Survey") -> "Standard":
        """Return what counts as in tune on a flute."""
        from fluteprobe.repertoire.sounds import Standard

        a4_hz = survey.sitting.a4_hz if self.a4_hz is None else self.a4_hz
        return Standard(tolerance_cents=self.tolerance_cents, a4_hz=a4_hz, best_a4=self.best_a4)


def _scales(ctx: click.Context, param: click.Parameter, given: tuple[str, ...]) -> "tuple[Scale, ...]":
    """Return the scales asked for."""
    from fluteprobe.flute.scales import named_scale

    try:
        return tuple(dict.fromkeys(named_scale(text) for text in given))
    except ValueError as error:
        raise click.BadParameter(f"{error}.", ctx, param) from None


def _tonics(ctx: click.Context, param: click.Parameter, given: tuple[str, ...]) -> tuple[int, ...]:
    """Return the tonics asked for as pitch classes."""
    from fluteprobe.flute.scales import tonic_of

    try:
        return tuple(dict.fromkeys(tonic_of(text) for text in given))
    except ValueError as error:
        raise click.BadParameter(f"{error}.", ctx, param) from None


@click.command(short_help="Which scales, and which tunes, a flute can play.")
@click.argument("paths", type=FOLDER, nargs=-1, required=True, metavar="FOLDER...")
@click.option(
    "--scale",
    "scales",
    multiple=True,
    callback=_scales,
    metavar="NAME|STEPS",
    help="major, minor, pentatonic-1 to pentatonic-5, or steps above the tonic in semitones ('0 2 4 7 9') "
    "or cents ('0 204c 386c').  [default: all that have a name]",
)
@click.option(
    "--tonic",
    "tonics",
    multiple=True,
    callback=_tonics,
    metavar="NOTE",
    help="The scale's first note: C, F#, Bb.  [default: all twelve]",
)
@click.option("--tune", type=FOLDER, metavar="FILE", help="A tune in MusicXML or a MIDI file.")
@click.option(
    "--part", metavar="NAME|NUMBER", help="Which part of the tune.  [default: the first with notes]"
)
@click.option(
    "--transpose",
    "semitones",
    type=click.IntRange(-127, 127),
    metavar="SEMITONES",
    help="Show the tune moved by so many semitones up, 0 as written.  [default: where it fits best]",
)
@click.option(
    "--write",
    "is_written",
    is_flag=True,
    help="Write the tune so moved as MusicXML, with the fingerings below its notes.",
)
@click.option(
    "--tolerance",
    "tolerance_cents",
    type=click.FloatRange(0.0, 50.0, min_open=True),
    default=20.0,
    metavar="CENTS",
    help="How far off a note may be.  [default: 20]",
)
@click.option("--a4-hz", type=A4_HZ, metavar="HZ", help="The A4 to play at.  [default: the session's]")
@click.option("--best-a4", is_flag=True, help="Let A4 move to where the flute fits best.")
@click.option("--all", "show_all", is_flag=True, help="Show keys and transpositions that do not work, too.")
@out_option
@json_option
@click.pass_context
def plays(  # noqa: PLR0913, PLR0917  (click passes every option by name)
    ctx: click.Context,
    paths: tuple[Path, ...],
    scales: "tuple[Scale, ...]",
    tonics: tuple[int, ...],
    tune: Path | None,
    part: str | None,
    semitones: int | None,
    is_written: bool,
    tolerance_cents: float,
    a4_hz: float | None,
    best_a4: bool,
    show_all: bool,
    out: Path | None,
    as_json: bool,
) -> None:
    """Tell what measured flutes can play: session folders or measurements.json files.

    Tells in which keys a scale can be played, with an octave from tonic to tonic, and which notes are
    missing. A single key is told note by note, with fingerings. Of a tune it tells the transposition that
    suits the flute best, with fingerings, and where it falls short. A note can surely be played if it
    speaks well and is within the tolerance with 95 % confidence, perhaps if it may be within it.

    \b
    Example:
      fluteprobe plays heron --scale pentatonic-5
    """  # noqa: D301  (click reads the \b)
    from fluteprobe.cli import screen
    from fluteprobe.cli.surveys import gathered
    from fluteprobe.flute.scales import NAMES, named_scale
    from fluteprobe.results import json_text
    from fluteprobe.session import SessionError

    if tune is None and (part is not None or semitones is not None or is_written):
        raise click.UsageError("--part, --transpose and --write need a --tune.")
    names = () if tune is not None and not tonics else NAMES
    wish = Wish(
        scales=scales or tuple(named_scale(name) for name in names),
        tonics=tonics or tuple(ALL_TONICS),
        tune=None if tune is None else _tune(tune, part),
        semitones=semitones,
        tolerance_cents=tolerance_cents,
        a4_hz=a4_hz,
        best_a4=best_a4,
    )
    sources = gathered(paths)
    for fault in sources.faults:
        screen.say(f"Not used: {fault}", err=True)
    if not sources.surveys:
        raise SessionError("no flute could be used")
    answers = [_answer(survey, wish) for survey in sources.surveys]
    if as_json:
        values = _as_json(wish, zip(sources.names, sources.surveys, answers, strict=True), sources.faults)
        click.echo(json_text(values), nl=False)
    else:
        screen.say(
            "\n\n".join(_told(s, wish, a, show_all) for s, a in zip(sources.surveys, answers, strict=True))
        )
    for caution in () if wish.tune is None else wish.tune.cautions:
        screen.say(f"Caution: {caution}", err=True)
    if is_written and tune is not None:
        for name, answer in zip(sources.names, answers, strict=True):
            folder = Path("reports", name) if out is None else out / name if len(answers) > 1 else out
            screen.tell_written(_written(wish, answer, tune.stem, folder))
    ctx.exit(1 if sources.faults else 0)


Answer = tuple["Standard", "list[ScaleFit]", "tuple[TuneFit, ...] | None"]


def _answer(survey: "Survey", wish: Wish) -> Answer:
    """Return what a flute plays of what is asked."""
    from fluteprobe.repertoire.scales import best_first, scale_fit
    from fluteprobe.repertoire.sounds import Compass, sounds_of

    standard, compass = wish.standard(survey), Compass(sounds_of(survey))
    fits: list[ScaleFit] = []
    for scale in wish.scales:
        fits += best_first(scale_fit(scale, tonic, compass, standard) for tonic in wish.tonics)
    return standard, fits, None if wish.tune is None else _tune_answer(wish.tune, wish, compass, standard)


def _tune_answer(tune: "Tune", wish: Wish, compass: "Compass", standard: "Standard") -> "tuple[TuneFit, ...]":
    """Return a tune's transpositions, the one asked for first."""
    from fluteprobe.repertoire.tunes import tune_fit, tune_fits

    fits = tune_fits(tune, compass, standard)
    if wish.semitones is None:
        return fits
    wanted = tune_fit(tune, wish.semitones, compass, standard)
    return (wanted, *(fit for fit in fits if fit.semitones != wish.semitones))


def _tune(path: Path, part: str | None) -> "Tune":
    """Return the tune in a file; what is wrong with it is one line with its name."""
    from fluteprobe.repertoire.tunes import require_playable
    from fluteprobe.score.reading import read_tune
    from fluteprobe.score.tune import ScoreError
    from fluteprobe.session import SessionError, printable

    try:
        tune = read_tune(path, part)
        require_playable(tune)
    except ScoreError as error:
        raise SessionError(f"{printable(str(path))}: {printable(str(error))}") from None
    except OSError as error:
        raise SessionError(f"{printable(str(path))} cannot be read: {error.strerror}") from None
    return tune


def _written(wish: Wish, answer: Answer, name: str, folder: Path) -> list[Path]:
    """Write the tune as it is told first, and return its path; of a flute that never spoke there is none."""
    from fluteprobe.files import make_folder, replace_files
    from fluteprobe.repertoire.tunes import tune_xml
    from fluteprobe.score.tune import ScoreError
    from fluteprobe.session import SessionError

    _, _, fits = answer
    if wish.tune is None or not fits:
        return []
    try:
        content = tune_xml(wish.tune, fits[0], wish.tune.title or name)
    except ScoreError as error:
        raise SessionError(str(error)) from None
    make_folder(folder)
    path = folder / f"{name}-fingered.musicxml"
    replace_files({path: content})
    return [path]


def _as_json(
    wish: Wish, answers: "Iterator[tuple[str, Survey, Answer]]", faults: Sequence[str]
) -> Mapping[str, Any]:
    from fluteprobe.repertoire.report import flute_json, plays_json, tune_json

    flutes = []
    for name, survey, (standard, fits, tune_fits) in answers:
        tune = None if wish.tune is None or tune_fits is None else tune_json(wish.tune, tune_fits)
        flutes.append(flute_json(survey.flute.name, name, standard, fits, tune))
    return plays_json(wish.tolerance_cents, wish.best_a4, flutes, faults)


def _told(survey: "Survey", wish: Wish, answer: Answer, show_all: bool) -> str:
    from fluteprobe.cli.played import heading, scales_told, tune_told

    standard, fits, tune_fits = answer
    blocks = [heading(survey.flute, standard)]
    if fits:
        blocks.append(scales_told(fits, show_all=show_all))
    if wish.tune is not None and tune_fits is not None:
        blocks.append(tune_told(wish.tune, tune_fits, show_all=show_all))
    return "\n\n".join(blocks)
