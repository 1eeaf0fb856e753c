"""The command line as a whole: its commands, and the one place where expected failures become one line.

Conventions: results go to stdout, progress and cautions to stderr. Exit code 0 is done, 1 is some input (or
output) could not be used, 2 is wrong usage of the command line. Nothing is coloured. Commands import what is
slow to load when they run, so that help is instant.

Takes are heard side by side, one on each core. Their matrix products are small, so that numpy must
not spread each of them over all cores again: that costs several times the work itself.
"""

import os
import sys
from typing import IO, Any

import click

from fluteprobe.cli.begin import begin
from fluteprobe.cli.chart import chart
from fluteprobe.cli.compare import compare
from fluteprobe.cli.forecast import forecast
from fluteprobe.cli.hear import hear
from fluteprobe.cli.measure import measure
from fluteprobe.cli.plays import plays
from fluteprobe.cli.sheet import sheet
from fluteprobe.cli.split import split
from fluteprobe.cli.tuning import tuning
from fluteprobe.version import __version__

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")  # read when numpy is first loaded, in a command's body


class Unusable(click.ClickException):
    """Input that cannot be used at all: a line for each reason, exit code 1."""

    def __init__(self, *faults: str) -> None:
        super().__init__("\n".join(faults))
        self.faults = faults

    def show(self, file: IO[Any] | None = None) -> None:
        """Print the reasons, a line each."""
        for fault in self.faults:
            click.echo(f"Error: {fault}", file=file, err=file is None)


class Door(click.Group):
    """The group of commands, and the boundary for failures that are no bugs."""

    def list_commands(self, ctx: click.Context) -> list[str]:  # noqa: ARG002  (click passes it)
        """Return the commands in the order in which they are needed."""
        return list(self.commands)

    def invoke(self, ctx: click.Context) -> Any:
        """Run a command; what its input is to blame for ends in one line, a bug in a traceback."""
        from fluteprobe.session import SessionError, printable

        try:
            return super().invoke(ctx)
        except SessionError as error:
            raise Unusable(*error.faults) from None
        except BrokenPipeError:
            raise
        except OSError as error:
            where = f"{printable(str(error.filename))}: " if error.filename else ""
            raise Unusable(f"{where}{error.strerror or error}") from None


@click.group(
    cls=Door,
    commands=[begin, sheet, split, hear, measure, chart, forecast, compare, plays, tuning],
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 88, "color": False},
)
@click.version_option(__version__, "-V", "--version", prog_name="fluteprobe")
def main() -> None:
    """Find out which notes a flute plays: with which fingering, how far off, and how surely.

    Make a folder for the flute, record one fingering a file into it, and draw its chart.

    \b
    Example:
      fluteprobe begin heron --holes 6
    """  # noqa: D301  (click reads the \b)
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace")
