"""`fluteprobe tuning`: a flute's own tuning for a keyboard, as files that other programs read."""

from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING

import click

from fluteprobe.cli.options import FOLDER, formats_of, json_option, out_option

if TYPE_CHECKING:
    from fluteprobe.repertoire.keyboard import Address, Key
    from fluteprobe.survey import Survey

FORMATS = {"syx": "tuning.syx", "mid": "tuning.mid", "musicxml": "scale.musicxml"}


@click.command(short_help="Write a flute's tuning for a keyboard.")
@click.argument("folder", type=FOLDER)
@click.option(
    "--format",
    "formats",
    multiple=True,
    default=tuple(FORMATS),
    callback=formats_of(FORMATS),
    metavar="|".join(FORMATS),
    help="Kind of file; several with commas.  [default: all three]",
)
@click.option(
    "--device",
    type=click.IntRange(0, 127),
    default=127,
    metavar="NUMBER",
    help="Which device is to listen.  [default: 127, all]",
)
@click.option(
    "--program",
    type=click.IntRange(0, 127),
    default=0,
    metavar="NUMBER",
    help="Which of the device's tuning programs is filled.  [default: 0]",
)
@click.option(
    "--bank",
    type=click.IntRange(0, 127),
    metavar="NUMBER",
    help="The bank of that tuning program, in messages for setting up.  [default: none, messages that "
    "act at once]",
)
@out_option
@json_option
@click.pass_context
def tuning(  # noqa: PLR0913, PLR0917  (click passes every option by name)
    ctx: click.Context,
    folder: Path,
    formats: tuple[str, ...],
    device: int,
    program: int,
    bank: int | None,
    out: Path | None,
    as_json: bool,
) -> None:
    """Write a measured flute's tuning for other software, so that a keyboard sounds like the flute.

    Takes a session folder or a measurements.json. Writes tuning.syx, messages of the MIDI Tuning
    Standard that give each key its measured frequency; tuning.mid, the same and then the scale with its
    fingerings; scale.musicxml, every fingering as a note of its true pitch. Keys that the flute has no
    note for are left as they are.

    \b
    Example:
      fluteprobe tuning heron --format mid
    """  # noqa: D301  (click reads the \b)
    from fluteprobe.cli import screen
    from fluteprobe.cli.surveys import gathered
    from fluteprobe.files import make_folder, replace_files
    from fluteprobe.repertoire.keyboard import Address, keys_of
    from fluteprobe.repertoire.report import tuning_json
    from fluteprobe.repertoire.sounds import sounds_of
    from fluteprobe.results import json_text
    from fluteprobe.session import SessionError, printable

    sources = gathered([folder])
    for fault in sources.faults:
        screen.say(f"Not used: {fault}", err=True)
    if not sources.surveys:
        raise SessionError("no flute could be used")
    survey, address = sources.surveys[0], Address(device=device, program=program, bank=bank)
    keys = keys_of(sounds_of(survey), survey.sitting.a4_hz)
    if not keys:
        raise SessionError(f"{printable(str(folder))} has no tone to tune a key to: record some takes")
    target = Path("reports", sources.names[0] or "flute") if out is None else out
    make_folder(target)
    contents = {target / FORMATS[suffix]: _made(survey, keys, address)[suffix]() for suffix in formats}
    replace_files(contents)
    if as_json:
        click.echo(json_text(tuning_json(survey.flute.name, keys, address, survey.sitting.a4_hz)), nl=False)
    else:
        screen.say(_told(survey, keys))
    screen.tell_written(contents)
    ctx.exit(1 if sources.faults else 0)


def _made(survey: "Survey", keys: "tuple[Key, ...]", address: "Address") -> dict[str, Callable[[], bytes]]:
    """Return what makes the contents of each kind of file."""
    from fluteprobe.repertoire.keyboard import mid_bytes, musicxml_bytes, syx_bytes
    from fluteprobe.repertoire.sounds import sounds_of
    from fluteprobe.session import printable

    name = printable(survey.flute.name)
    return {
        "syx": lambda: syx_bytes(keys, address),
        "mid": lambda: mid_bytes(keys, address, name),
        "musicxml": lambda: musicxml_bytes(sounds_of(survey), survey.sitting.a4_hz, name),
    }


def _told(survey: "Survey", keys: "tuple[Key, ...]") -> str:
    """Return which key sounds what."""
    from fluteprobe.cli.played import keys_told

    return keys_told(survey.flute, keys, survey.sitting.a4_hz)
