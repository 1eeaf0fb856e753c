"""`fluteprobe chart`: the printed pages."""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

import click

from fluteprobe.cli.measure import measured
from fluteprobe.cli.options import FOLDER, anew_option, formats_of, out_option, reports_folder

if TYPE_CHECKING:
    from fluteprobe.forecast import Prediction
    from fluteprobe.survey import Survey

FORMATS = ("pdf", "png", "svg", "html")
PAPERS = ("a4", "letter", "a6", "4x6")
CARDS = ("a6", "4x6")


@dataclass(frozen=True, slots=True, kw_only=True)
class Wish:
    """How the pages are to look."""

    paper: str
    large: bool
    tolerance_cents: float
    dots_per_inch: float
    with_sound: bool
    with_foretold: bool

    @property
    def name(self) -> str:
        """What the chart's file is called, so that a card or large print does not replace the chart."""
        return "card" if self.paper in CARDS else "chart-large" if self.large else "chart"

    @property
    def has_map(self) -> bool:
        """Whether the register map goes with it."""
        return self.name == "chart"


@click.command(short_help="Measure a flute and draw its printable chart.")
@click.argument("folder", type=FOLDER)
@click.option(
    "--format",
    "formats",
    multiple=True,
    default=("pdf",),
    callback=formats_of(FORMATS),
    metavar="|".join(FORMATS),
    help="Kind of file; several with commas.  [default: pdf]",
)
@click.option(
    "--paper",
    type=click.Choice(PAPERS, case_sensitive=False),
    default="a4",
    help="What it is printed on: a6 and 4x6 (inches) are cards for the flute's case.  [default: a4]",
)
@click.option("--large", is_flag=True, help="Large print, for a music stand.")
@click.option(
    "--tolerance",
    "tolerance_cents",
    type=click.FloatRange(0.0, 50.0, min_open=True),
    default=10.0,
    metavar="CENTS",
    help="How far off still counts as tuned.  [default: 10]",
)
@click.option(
    "--resolution",
    "dots_per_inch",
    type=click.FloatRange(40.0, 1200.0),
    default=200.0,
    metavar="DPI",
    help="How fine a PNG is, in dots per inch.  [default: 200]",
)
@click.option(
    "--no-sound", is_flag=True, help="Leave the recordings out of the web page (html), which makes it small."
)
@click.option(
    "--foretold", is_flag=True, help="Show also the upper notes not yet played, as outlines and as estimates."
)
@anew_option
@out_option
@click.pass_context
def chart(  # noqa: PLR0913, PLR0917  (click passes every option by name)
    ctx: click.Context,
    folder: Path,
    formats: tuple[str, ...],
    paper: str,
    large: bool,
    tolerance_cents: float,
    dots_per_inch: float,
    no_sound: bool,
    foretold: bool,
    anew: bool,
    out: Path | None,
) -> None:
    """Measure the takes of a session folder that have changed and draw the flute's fingering chart.

    Writes chart.pdf and map.pdf, the map of its registers (or the formats asked for),
    measurements.json and measurements.csv, and prints where. A card is card.pdf, with the best
    fingering of each note; large print is chart-large.pdf. The format html is a web page that can be
    read, heard and sent as it is. A take that cannot be used is named, and the chart is drawn from
    all others.

    \b
    Example:
      fluteprobe chart heron --format pdf,png
    """  # noqa: D301  (click reads the \b)
    from fluteprobe.cli import screen
    from fluteprobe.results import write_results

    if large and paper in CARDS:
        raise click.UsageError(f"--large needs a larger paper than {paper}: a4 or letter.")
    wish = Wish(
        paper=paper,
        large=large,
        tolerance_cents=tolerance_cents,
        dots_per_inch=dots_per_inch,
        with_sound=not no_sound,
        with_foretold=foretold,
    )
    target = reports_folder(folder, out)
    survey = measured(folder, target, anew=anew)
    written = [*write_results(survey, target), *_drawn(survey, folder, target, formats, wish)]
    screen.tell_cautions(survey.readings)
    screen.tell_problems(survey.problems)
    screen.tell_written(written, as_result=True)
    ctx.exit(1 if survey.problems else 0)


def _drawn(
    survey: "Survey", folder: Path, target: Path, formats: Sequence[str], wish: Wish
) -> Iterator[Path]:
    """Draw the pages in every format, and name the files written."""
    for suffix in formats:
        if suffix == "html":
            yield from _web_page(survey, folder, target, wish)
        else:
            yield from _printed(survey, target, suffix, wish)


def _web_page(survey: "Survey", folder: Path, target: Path, wish: Wish) -> Iterator[Path]:
    from fluteprobe.pages.web import write_web

    page = target / "chart.html"
    yield from write_web(
        survey, folder, page, tolerance_cents=wish.tolerance_cents, with_sound=wish.with_sound
    )


def _printed(survey: "Survey", target: Path, suffix: str, wish: Wish) -> Iterator[Path]:
    from fluteprobe.pages.chart import write_chart
    from fluteprobe.pages.map import write_map

    foretold = _foretold(survey) if wish.with_foretold else ()
    yield from write_chart(
        survey,
        target / f"{wish.name}.{suffix}",
        paper=wish.paper,
        large=wish.large,
        tolerance_cents=wish.tolerance_cents,
        dots_per_inch=wish.dots_per_inch,
        foretold=foretold,
    )
    if wish.has_map:
        page = target / f"map.{suffix}"
        yield from write_map(survey, page, paper=wish.paper, dots_per_inch=wish.dots_per_inch)


def _foretold(survey: "Survey") -> tuple["Prediction", ...]:
    """Return what is foretold of the flute; where nothing can be, say why."""
    from fluteprobe.cli import screen
    from fluteprobe.forecast import forecast

    result = forecast(survey)
    if result.reason is not None:
        screen.say(f"Caution: nothing is foretold: {result.reason}", err=True)
    return result.predictions
