"""`fluteprobe measure`: the survey of a session folder, on screen and as files."""

from itertools import groupby
from pathlib import Path
from typing import TYPE_CHECKING

import click

from fluteprobe.cli.options import FOLDER, anew_option, json_option, out_option, paper_option, reports_folder
from fluteprobe.cli.second import Opinions, second_option

if TYPE_CHECKING:
    from fluteprobe.survey import Reading, Survey

PAGES_FOLDER = "takes"  # in the folder of the session's reports


@click.command(short_help="Measure a flute: a table, measurements.json and .csv.")
@click.argument("folder", type=FOLDER)
@out_option
@anew_option
@second_option
@click.option(
    "--explain", "takes", metavar="TAKE", multiple=True, help="Say why a take's tones have their registers."
)
@click.option("--pages", is_flag=True, help="Draw a page for every take too: what was measured, and why.")
@paper_option("a take's page")
@json_option
@click.pass_context
def measure(  # noqa: PLR0913, PLR0917  (one parameter an option)
    ctx: click.Context,
    folder: Path,
    out: Path | None,
    anew: bool,
    second: bool,
    takes: tuple[str, ...],
    pages: bool,
    paper: str,
    as_json: bool,
) -> None:
    """Measure every take of a session folder and print what each fingering gives.

    Also writes measurements.json and measurements.csv. A take that cannot be used is named, and all
    others are measured. What was heard is kept beside them, so that the next run hears only the
    takes that are new or have changed.

    \b
    Example:
      fluteprobe measure heron
    """  # noqa: D301  (click reads the \b)
    from fluteprobe.cli import screen
    from fluteprobe.cli.reasons import explained
    from fluteprobe.cli.second import asked, told, with_opinions
    from fluteprobe.cli.take_pages import draw_pages
    from fluteprobe.results import json_text, replace_file, survey_json, write_results

    target = reports_folder(folder, out)
    survey = measured(folder, target, anew=anew)
    reasons = [explained(survey.readings, take) for take in takes]
    written, values, problems = write_results(survey, target), survey_json(survey), [*survey.problems]
    opinions: Opinions | None = None
    if pages:
        opinions, undrawn = draw_pages(_by_take(folder, survey), target / PAGES_FOLDER, paper, second)
        problems += undrawn
    elif second:
        opinions = asked([(folder / reading.take, reading) for reading in survey.readings])
    if second and opinions is not None:
        values = with_opinions(values, opinions)
        replace_file(written[0], json_text(values).encode("utf-8"))
    if as_json:
        click.echo(json_text(values), nl=False)
    else:
        screen.say(screen.survey_table(survey))
        if opinions is not None and any(opinions):
            screen.say("\n" + told(survey.readings, opinions))
        for reason in reasons:
            screen.say("\n" + reason)
        screen.tell_cautions(survey.readings)
    screen.tell_problems(problems)
    screen.tell_written(written)
    ctx.exit(1 if problems else 0)


def _by_take(folder: Path, survey: "Survey") -> list[tuple[Path, list["Reading"]]]:
    """Return every take's recording with what was heard in it."""
    takes = groupby(survey.readings, key=lambda reading: reading.take)
    return [(folder / take, list(readings)) for take, readings in takes]


def measured(folder: Path, target: Path, *, anew: bool = False) -> "Survey":
    """Return the survey of a folder, with a progress bar where it takes long; what is heard is kept."""
    from fluteprobe import survey
    from fluteprobe.cli import screen
    from fluteprobe.kept import KEPT_FOLDER, Kept
    from fluteprobe.session import SessionError, printable

    kept = Kept(folder=target / KEPT_FOLDER, anew=anew)
    with screen.progress("Listening") as on_take:
        result = survey.measure(folder, on_take=on_take, kept=kept)
    if not result.readings:
        screen.tell_problems(result.problems)
        raise SessionError(f"{printable(str(folder))} has no take that could be measured")
    return result
