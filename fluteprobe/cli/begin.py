"""`fluteprobe begin`: makes a session folder."""

import sys
from pathlib import Path
from typing import Any

import click

from fluteprobe.cli.options import FOLDER

_USUAL_HOLES = 6
_A4_HZ = 440.0


class Fact(click.ParamType):  # type: ignore[type-arg]  # generic in some versions of click alone
    """A value of flute.toml as it is typed: checked as in the file; numbers may have a comma and a unit."""

    def __init__(self, table: str, key: str) -> None:
        self.table, self.key, self.name = table, key, key

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> Any:
        """Return the value, None where nothing was typed."""
        from fluteprobe.session.keys import UnfitError, typed

        try:
            return typed(self.table, self.key, str(value))
        except UnfitError as error:
            self.fail(str(error), param, ctx)

    def answered(self, answer: str) -> Any:
        """Return the value of an answer to a question; a wrong one is a click.UsageError."""
        return self.convert(answer, None, None)


_HOLES = Fact("flute", "holes")
_TEMPERATURE = Fact("session", "air_temperature_c")


def _pairs(_ctx: click.Context, param: click.Parameter, words: tuple[tuple[str, str], ...]) -> Any:
    """Return the pairs that were typed, checked as in the file; None where none were."""
    from fluteprobe.session.keys import KEYS, UnfitError, number_in
    from fluteprobe.session.words import shown

    if not words:
        return None
    try:
        return KEYS["flute"][param.name or ""].read([[number_in(word) for word in pair] for pair in words])
    except UnfitError as error:
        found = shown(", ".join(" ".join(pair) for pair in words))
        raise click.BadParameter(f"found {found}, expected {error}") from None


@click.command(short_help="Make a session folder, ready for recordings.")
@click.argument("folder", type=FOLDER)
@click.option(
    "--name", type=Fact("flute", "name"), metavar="TEXT", help="The flute's.  [default: the folder's]"
)
@click.option("--holes", type=_HOLES, metavar="N", help="How many finger holes.  [default: 6]")
@click.option("--maker", type=Fact("flute", "maker"), metavar="TEXT", help="Who made it.")
@click.option("--serial", type=Fact("flute", "serial"), metavar="TEXT", help="Its number.")
@click.option("--key", type=Fact("flute", "key"), metavar="TEXT", help="The key it is in.")
@click.option("--wood", type=Fact("flute", "wood"), metavar="TEXT", help="What it is made of.")
@click.option(
    "--bore-mm", type=Fact("flute", "bore_mm"), metavar="MM", help="Inner diameter of the sounding tube."
)
@click.option(
    "--bore-profile-mm",
    type=(str, str),
    multiple=True,
    callback=_pairs,
    metavar="FAR WIDE",
    help="If it tapers or steps: the bore at a distance from the sound hole; once for each place, in order.",
)
@click.option("--wall-mm", type=Fact("flute", "wall_mm"), metavar="MM", help="Thickness of its wall.")
@click.option(
    "--length-mm", type=Fact("flute", "length_mm"), metavar="MM", help="From the sound hole to the foot."
)
@click.option(
    "--hole-mm",
    "holes_mm",
    type=(str, str),
    multiple=True,
    callback=_pairs,
    metavar="FAR WIDE",
    help="A hole's distance from the sound hole and its diameter; once for each hole, top hole first.",
)
@click.option(
    "--tolerance-mm",
    type=Fact("flute", "tolerance_mm"),
    metavar="MM",
    help="How exact these dimensions are.",
)
@click.option(
    "--a4-hz", type=Fact("session", "a4_hz"), metavar="HZ", help="What A4 is tuned to.  [default: 440]"
)
@click.option(
    "--temperature", "air_temperature_c", type=_TEMPERATURE, metavar="°C", help="Of the air while recording."
)
@click.option(
    "--reference-temperature",
    "reference_temperature_c",
    type=Fact("session", "reference_temperature_c"),
    metavar="°C",
    help="Carry pitches to this one too, as an estimate.",
)
@click.option("--date", type=Fact("session", "date"), metavar="TEXT", help="When it was recorded.")
@click.option("--player", type=Fact("session", "player"), metavar="TEXT", help="Who played.")
@click.option("--place", type=Fact("session", "place"), metavar="TEXT", help="Where.")
@click.option(
    "--microphone", type=Fact("session", "microphone"), metavar="TEXT", help="With what, and from how far."
)
def begin(folder: Path, **given: Any) -> None:
    """Make a session folder: one flute, one sitting.

    FOLDER gets a flute.toml, with comments, and takes/ for the recordings. What is there already
    stays. In a terminal, what was not given and matters most is asked for: the name, the holes, the
    key and the temperature. An empty answer takes what is offered, or leaves it out.

    \b
    Example:
      fluteprobe begin heron --holes 6 --temperature 21.5
    """  # noqa: D301  (click reads the \b)
    from fluteprobe.session import FluteFacts, Sitting, create_session, printable, require_new

    require_new(folder)
    offered = printable(folder.resolve().name).strip() or "flute"
    if given["holes"] is None and given["holes_mm"]:
        given["holes"] = len(given["holes_mm"])
    if _on_terminal():
        _ask(given, offered)
    usual = {"name": offered, "holes": _USUAL_HOLES, "a4_hz": _A4_HZ}
    given |= {key: value for key, value in usual.items() if given[key] is None}
    flute = {key: given.pop(key) for key in FluteFacts.__dataclass_fields__}
    facts = create_session(folder, FluteFacts(**flute), Sitting(**given))
    _say_what_next(folder, facts, flute["holes"])


def _on_terminal() -> bool:
    """Whether somebody sees questions and can answer them."""
    return sys.stdin.isatty() and sys.stderr.isatty()


def _ask(given: dict[str, Any], name: str) -> None:
    """Ask for what was not given; an empty answer takes what is offered, a wrong one is asked for again."""
    questions = (
        (Fact("flute", "name"), "Name of the flute", name),
        (_HOLES, "Finger holes", str(_USUAL_HOLES)),
        (Fact("flute", "key"), "Key it is in, if known", ""),
        (_TEMPERATURE, "Temperature of the air in °C, if known", ""),
    )
    for fact, question, offered in questions:
        if given[fact.key] is None:
            given[fact.key] = click.prompt(
                question,
                default=offered,
                show_default=bool(offered),
                value_proc=fact.answered,
                err=True,
            )


def _say_what_next(folder: Path, facts: Path, holes: int) -> None:
    import shlex

    from fluteprobe.session import printable

    shown = printable(shlex.quote(str(folder)))
    click.echo(f"Made {printable(str(facts))} for a flute with {holes} hole{'s' if holes > 1 else ''}.")
    click.echo(
        f"Put the recordings into {printable(str(folder / 'takes'))}, one fingering a file, named by it:"
    )
    click.echo(f"  {'o' + 'x' * (holes - 1)}.wav   top hole open, all others closed")
    click.echo(f"Then: fluteprobe chart {shown}")
