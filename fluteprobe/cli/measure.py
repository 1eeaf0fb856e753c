"""`fluteprobe measure`: the survey of a session folder, on screen and as files."""

from pathlib import Path
from typing import TYPE_CHECKING

import click

from fluteprobe.cli.options import FOLDER, json_option, out_option, reports_folder
from fluteprobe.cli.second import second_option

if TYPE_CHECKING:
    from fluteprobe.survey import Survey


@click.command(short_help="Measure a flute: a table, measurements.json and .csv.")
@click.argument("folder", type=FOLDER)
@out_option
@second_option
@click.option(
    "--explain", "takes", metavar="TAKE", multiple=True, help="Say why a take's tones have their registers."
)
@json_option
@click.pass_context
def measure(  # noqa: PLR0913, PLR0917  (one parameter an option)
    ctx: click.Context, folder: Path, out: Path | None, second: bool, takes: tuple[str, ...], as_json: bool
) -> None:
    """Measure every take of a session folder and print what each fingering gives.

    Also writes measurements.json and measurements.csv. A take that cannot be used is named, and all
    others are measured.

    \b
    Example:
      fluteprobe measure heron
    """  # noqa: D301  (click reads the \b)
    from fluteprobe.cli import screen
    from fluteprobe.cli.reasons import explained
    from fluteprobe.cli.second import asked, told, with_opinions
    from fluteprobe.results import json_text, replace_file, survey_json, write_results

    survey = measured(folder)
    reasons = [explained(survey.readings, take) for take in takes]
    written = write_results(survey, reports_folder(folder, out))
    values = survey_json(survey)
    opinions = asked([(folder / r.take, r) for r in survey.readings]) if second else None
    if opinions is not None:
        values = with_opinions(values, opinions)
        replace_file(written[0], json_text(values).encode("utf-8"))
    if as_json:
        click.echo(json_text(values), nl=False)
    else:
        screen.say(screen.survey_table(survey))
        if opinions is not None:
            screen.say("\n" + told(survey.readings, opinions))
        for reason in reasons:
            screen.say("\n" + reason)
        screen.tell_cautions(survey.readings)
    screen.tell_problems(survey.problems)
    screen.tell_written(written)
    ctx.exit(1 if survey.problems else 0)


def measured(folder: Path) -> "Survey":
    """Return the survey of a folder, with a progress bar where it takes long."""
    from fluteprobe import survey
    from fluteprobe.cli import screen
    from fluteprobe.session import SessionError, printable

    with screen.progress("Listening") as on_take:
        result = survey.measure(folder, on_take=on_take)
    if not result.readings:
        screen.tell_problems(result.problems)
        raise SessionError(f"{printable(str(folder))} has no take that could be measured")
    return result
