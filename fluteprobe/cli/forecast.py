"""`fluteprobe forecast`: the upper notes that a flute will play, before they are played."""

from pathlib import Path
from typing import TYPE_CHECKING

import click

from fluteprobe.cli.options import FOLDER, json_option, out_option, paper_option

if TYPE_CHECKING:
    from fluteprobe.forecast import Forecast


@click.command(short_help="Foretell the upper notes not yet played.")
@click.argument("folder", type=FOLDER)
@click.option("--all", "show_all", is_flag=True, help="Show also what will hardly speak.")
@click.option("--maker", is_flag=True, help="Show what a small change of each hole does to each note.")
@click.option("--sheet", "with_sheet", is_flag=True, help="Write a sheet of what to record next: next.pdf.")
@paper_option("the sheet")
@out_option
@json_option
@click.pass_context
def forecast(  # noqa: PLR0913, PLR0917  (one parameter an option)
    ctx: click.Context,
    folder: Path,
    show_all: bool,
    maker: bool,
    with_sheet: bool,
    paper: str,
    out: Path | None,
    as_json: bool,
) -> None:
    """Foretell the second and third registers of a measured flute, and say what to try next.

    Takes a session folder or a measurements.json. Every fingering that can matter gets a pitch with its
    uncertainty, from the breath's resonances and a tube fitted to them and to the tones, and a chance
    to speak; what would fill the scale above the first register comes first. What was played already is
    foretold from the rest, for comparison. Writes forecast.json.

    \b
    Example:
      fluteprobe forecast heron
    """  # noqa: D301  (click reads the \b)
    from fluteprobe.cli import screen
    from fluteprobe.cli.foretold import told, unfit_told
    from fluteprobe.cli.surveys import gathered
    from fluteprobe.files import make_folder, replace_files
    from fluteprobe.forecast import forecast as foretold
    from fluteprobe.forecast.contract import forecast_json
    from fluteprobe.results import json_text
    from fluteprobe.session import SessionError

    sources = gathered([folder])
    for fault in sources.faults:
        screen.say(f"Not used: {fault}", err=True)
    if not sources.surveys:
        raise SessionError("no flute could be used")
    result = foretold(sources.surveys[0])
    text = json_text(forecast_json(result))
    target = Path("reports", sources.names[0] or "flute") if out is None else out
    make_folder(target)
    replace_files({target / "forecast.json": text.encode("utf-8")})
    written = [target / "forecast.json"]
    if with_sheet and result.reason is None:
        written += _sheet_of(result, target / "next.pdf", paper)
    if as_json:
        click.echo(text, nl=False)
    elif result.reason is None:
        screen.say(told(result, show_all=show_all, maker=maker))
    if result.reason is not None:
        screen.say(unfit_told(result), err=True)
    screen.tell_written(written)
    ctx.exit(1 if sources.faults or result.reason is not None else 0)


def _sheet_of(result: "Forecast", target: Path, paper: str) -> tuple[Path, ...]:
    """Write the sheet of what to record next."""
    from fluteprobe.forecast.again import next_takes
    from fluteprobe.pages.sheet import write_sheet
    from fluteprobe.session import Session

    session = Session(folder=target.parent, flute=result.flute, sitting=result.sitting, takes=())
    return write_sheet(session, target, paper=paper, plan=next_takes(result))
