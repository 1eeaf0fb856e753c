"""`fluteprobe begin`: makes a session folder."""

import sys
from pathlib import Path
from typing import Any

import click

from fluteprobe.cli.options import A4_HZ, FOLDER

_TEMPERATURE_C = click.FloatRange(-20.0, 50.0)
_USUAL_HOLES = 6


@click.command(short_help="Make a session folder, ready for recordings.")
@click.argument("folder", type=FOLDER)
@click.option("--name", help="What the flute is called.  [default: the folder's name]")
@click.option("--holes", type=click.IntRange(1, 10), metavar="N", help="How many finger holes.  [default: 6]")
@click.option("--maker", help="Who made it.")
@click.option("--serial", help="Its number.")
@click.option("--key", help="The key it is in.")
@click.option("--wood", help="What it is made of.")
@click.option(
    "--bore-mm", type=click.FloatRange(2.0, 100.0), metavar="MM", help="Inner diameter of the sounding tube."
)
@click.option("--wall-mm", type=click.FloatRange(0.2, 50.0), metavar="MM", help="Thickness of its wall.")
@click.option("--a4-hz", type=A4_HZ, default=440.0, metavar="HZ", help="What A4 is tuned to.  [default: 440]")
@click.option(
    "--temperature",
    "air_temperature_c",
    type=_TEMPERATURE_C,
    metavar="°C",
    help="Of the air while recording.",
)
@click.option(
    "--reference-temperature",
    "reference_temperature_c",
    type=_TEMPERATURE_C,
    metavar="°C",
    help="Carry pitches to this one too, as an estimate.",
)
@click.option("--date", help="When it was recorded.")
@click.option("--player", help="Who played.")
@click.option("--place", help="Where.")
@click.option("--microphone", help="With what, and from how far.")
def begin(folder: Path, **given: Any) -> None:
    """Make a session folder: one flute, one sitting.

    FOLDER gets a flute.toml, with comments, and takes/ for the recordings. What is there already
    stays. In a terminal, what was not given and matters most is asked for.

    \b
    Example:
      fluteprobe begin heron --holes 6 --temperature 21.5
    """  # noqa: D301  (click reads the \b)
    from fluteprobe.session import FluteFacts, Sitting, create_session, require_new

    require_new(folder)
    if _on_terminal():
        _ask(folder, given)
    given["name"] = given["name"] or folder.resolve().name
    given["holes"] = given["holes"] or _USUAL_HOLES
    flute = {key: given.pop(key) for key in FluteFacts.__dataclass_fields__ if key in given}
    facts = create_session(folder, FluteFacts(**flute), Sitting(**given))
    _say_what_next(folder, facts, flute["holes"])


def _on_terminal() -> bool:
    return sys.stdin.isatty()


def _ask(folder: Path, given: dict[str, Any]) -> None:
    """Ask for what was not given; an empty answer takes what is offered."""
    if given["name"] is None:
        given["name"] = click.prompt("Name of the flute", default=folder.resolve().name, err=True)
    if given["holes"] is None:
        given["holes"] = click.prompt(
            "Finger holes", default=_USUAL_HOLES, type=click.IntRange(1, 10), err=True
        )
    if given["air_temperature_c"] is None:
        question = "Temperature of the air in °C, if known"
        given["air_temperature_c"] = click.prompt(
            question, default="", show_default=False, value_proc=_temperature, err=True
        )


def _temperature(answer: str) -> Any:
    """Return a temperature in °C, None where nothing was answered."""
    return _TEMPERATURE_C(answer.replace(",", ".")) if answer.strip() else None


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
