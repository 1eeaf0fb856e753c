"""`fluteprobe sheet`: which fingerings to record, in which order, on paper and on screen."""

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from fluteprobe.cli.options import FOLDER, json_option, out_option, paper_option, reports_folder
from fluteprobe.flute.plan import EDITIONS

if TYPE_CHECKING:
    from fluteprobe.flute.plan import PlannedTake
    from fluteprobe.session import FluteFacts

FORMATS = ("pdf", "png", "svg")
SHEET_SCHEMA = "fluteprobe/sheet/1"


@click.command(short_help="List the takes to record, on a sheet to print.")
@click.argument("folder", type=FOLDER)
@click.option(
    "--edition",
    type=click.Choice(EDITIONS, case_sensitive=False),
    default="standard",
    help="How many takes: 15, about five a hole, or all that can matter.  [default: standard]",
)
@click.option(
    "--format",
    "suffix",
    type=click.Choice(FORMATS, case_sensitive=False),
    default="pdf",
    help="Kind of file.  [default: pdf]",
)
@paper_option("it")
@out_option
@json_option
def sheet(  # noqa: PLR0913, PLR0917  (click passes every option by name)
    folder: Path, edition: str, suffix: str, paper: str, out: Path | None, as_json: bool
) -> None:
    """List the takes worth recording on a session's flute, in an order easy on the fingers.

    Prints each take's file name and writes sheet.pdf (or the format asked for) with drawn fingerings,
    boxes to tick and directions for recording. What is recorded already is ticked.

    \b
    Example:
      fluteprobe sheet heron --edition short
    """  # noqa: D301  (click reads the \b)
    from fluteprobe.cli import screen
    from fluteprobe.flute.plan import take_plan
    from fluteprobe.pages.sheet import recorded, write_sheet
    from fluteprobe.results import json_text
    from fluteprobe.session import read_session

    session = read_session(folder)
    plan = take_plan(session.flute.holes, edition)
    ticks = recorded(plan, session.takes)
    target = reports_folder(folder, out) / f"sheet.{suffix}"
    target.parent.mkdir(parents=True, exist_ok=True)
    written = write_sheet(session, target, edition=edition, paper=paper)
    if as_json:
        click.echo(json_text(_sheet_json(session.flute, edition, plan, ticks)), nl=False)
    else:
        screen.say(_listed(session.flute, edition, plan, ticks))
    screen.tell_problems(session.problems)
    screen.tell_written(written)


def _sheet_json(
    flute: "FluteFacts", edition: str, plan: Sequence["PlannedTake"], ticks: Sequence[bool]
) -> dict[str, Any]:
    """Return the sheet as values: every take in order, and whether it is recorded."""
    return {
        "schema": SHEET_SCHEMA,
        "flute": {"name": flute.name, "holes": flute.holes},
        "edition": edition,
        "takes": [
            {
                "file": take.file_name,
                "fingering": str(take.fingering),
                "breath": take.breath,
                "number": take.number,
                "group": take.group,
                "why": take.why,
                "basis": take.basis,
                "recorded": done,
            }
            for take, done in zip(plan, ticks, strict=True)
        ],
    }


def _listed(flute: "FluteFacts", edition: str, plan: Sequence["PlannedTake"], ticks: Sequence[bool]) -> str:
    """Return the sheet as lines: every group with its reason, every take with its box and its number."""
    from textwrap import wrap

    from fluteprobe.cli.screen import WIDTH
    from fluteprobe.session import printable

    holes = f"{flute.holes} hole{'' if flute.holes == 1 else 's'}"
    tail = f" · {holes} · {edition} edition: {len(plan)} takes, {sum(ticks)} recorded"
    lines, group = [printable(flute.name)[: WIDTH - len(tail)] + tail], None
    for number, (take, done) in enumerate(zip(plan, ticks, strict=True), start=1):
        if take.group != group:
            group = take.group
            lines += ["", group, *wrap(f"{take.why} ({take.basis})", WIDTH)]
        lines.append(f"  [{'x' if done else ' '}] {number:3}  {take.file_name}")
    return "\n".join(lines)
