"""`fluteprobe compare`: several flutes, or one flute before and after work, side by side."""

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

import click

from fluteprobe.cli.options import A4_HZ, FOLDER, json_option, paper_option

if TYPE_CHECKING:
    from fluteprobe.compare.values import Comparison

FORMATS = ("pdf", "png", "svg")
PLACE = Path("reports", "comparison")


@dataclass(frozen=True, slots=True, kw_only=True)
class Wish:
    """How the pages are to look, and whether every flute gets a sheet of its own."""

    paper: str
    suffix: str
    tolerance_cents: float
    with_sheets: bool


@click.command(short_help="Compare flutes, or one flute before and after work.")
@click.argument("paths", type=FOLDER, nargs=-1, required=True, metavar="FOLDER...")
@click.option(
    "--by",
    type=click.Choice(("auto", "fingering", "note"), case_sensitive=False),
    default="auto",
    help="What is compared: the same fingering, or the same sounding note; auto is by fingering where "
    "the flutes are of one build.  [default: auto]",
)
@click.option(
    "--a4-hz", type=A4_HZ, metavar="HZ", help="The A4 to compare at.  [default: what most flutes have]"
)
@click.option(
    "--temperature",
    "temperature_c",
    type=click.FloatRange(-20.0, 50.0),
    metavar="CELSIUS",
    help="The air temperature that pitches are carried to.  [default: the reference the flutes name, or 20]",
)
@click.option(
    "--tolerance",
    "tolerance_cents",
    type=click.FloatRange(0.0, 50.0, min_open=True),
    default=10.0,
    metavar="CENTS",
    help="How far off still counts as tuned, on the pages.  [default: 10]",
)
@click.option("--sheets", is_flag=True, help="Draw a one-page sheet for every flute too, for its player.")
@click.option(
    "--format",
    "suffix",
    type=click.Choice(FORMATS, case_sensitive=False),
    default="pdf",
    help="Kind of file for the pages.  [default: pdf]",
)
@paper_option("it")
@click.option(
    "--out", type=FOLDER, metavar="DIR", help=f"Where files are written.  [default: {PLACE.as_posix()}]"
)
@json_option
@click.pass_context
def compare(  # noqa: PLR0913, PLR0917  (click passes every option by name)
    ctx: click.Context,
    paths: tuple[Path, ...],
    by: str,
    a4_hz: float | None,
    temperature_c: float | None,
    tolerance_cents: float,
    sheets: bool,
    suffix: str,
    paper: str,
    out: Path | None,
    as_json: bool,
) -> None:
    """Put measured flutes side by side: session folders or measurements.json files, two or more.

    Says how each note of each flute differs and whether that is more than the uncertainty, which notes
    all flutes play, and which A4 suits them best. Give one flute's sittings to see what moved between
    them, how it drifts over its dates, and what is the flute's and what the player's. Writes
    comparison.json, comparison.csv and comparison.pdf.

    \b
    Example:
      fluteprobe compare heron bittern
    """  # noqa: D301  (click reads the \b)
    from fluteprobe.cli import screen
    from fluteprobe.cli.compared import told
    from fluteprobe.cli.surveys import gathered
    from fluteprobe.compare import compare as compared
    from fluteprobe.compare.contract import comparison_json
    from fluteprobe.results import json_text
    from fluteprobe.session import SessionError

    if len(paths) < 2:
        raise click.UsageError("a comparison takes two folders or files, or more.")
    sources = gathered(paths)
    for fault in sources.faults:
        screen.say(f"Not used: {fault}", err=True)
    if len(sources.surveys) < 2:
        raise SessionError(f"{len(sources.surveys)} of {len(paths)} could be used: give two or more")
    comparison = compared(
        sources.surveys,
        names=sources.names,
        by=None if by == "auto" else "fingering" if by == "fingering" else "note",
        a4_hz=a4_hz,
        temperature_c=temperature_c,
    )
    values = comparison_json(comparison)
    if as_json:
        click.echo(json_text(values), nl=False)
    else:
        screen.say(told(comparison))
    for caution in comparison.cautions:
        screen.say(f"Caution: {caution}", err=True)
    wish = Wish(paper=paper, suffix=suffix, tolerance_cents=tolerance_cents, with_sheets=sheets)
    folder = out or PLACE
    screen.tell_written([*_written(comparison, json_text(values), folder), *_drawn(comparison, folder, wish)])
    ctx.exit(1 if sources.faults else 0)


def _written(comparison: "Comparison", as_json: str, folder: Path) -> list[Path]:
    """Write comparison.json and comparison.csv, and return their paths."""
    from fluteprobe.compare.contract import comparison_csv
    from fluteprobe.files import make_folder, replace_files

    make_folder(folder)
    values, table = folder / "comparison.json", folder / "comparison.csv"
    replace_files({values: as_json.encode("utf-8"), table: comparison_csv(comparison).encode("utf-8")})
    return [values, table]


def _drawn(comparison: "Comparison", folder: Path, wish: Wish) -> Iterator[Path]:
    """Draw the pages and name the files written."""
    from fluteprobe.pages.comparison import write_comparison

    target = folder / f"comparison.{wish.suffix}"
    yield from write_comparison(comparison, target, paper=wish.paper, tolerance_cents=wish.tolerance_cents)
    if wish.with_sheets:
        from fluteprobe.pages.student import write_students

        sheets = folder / f"students.{wish.suffix}"
        yield from write_students(comparison, sheets, paper=wish.paper, tolerance_cents=wish.tolerance_cents)
