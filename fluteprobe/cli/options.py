"""Arguments and options that several commands share."""

from collections.abc import Callable
from pathlib import Path
from typing import Any, TypeVar

import click

FOLDER = click.Path(path_type=Path)
A4_HZ = click.FloatRange(380.0, 500.0)

Command = TypeVar("Command", bound=Callable[..., Any])


def json_option(command: Command) -> Command:
    """Add `--json`."""
    return click.option("--json", "as_json", is_flag=True, help="Print JSON instead of a table.")(command)


def anew_option(command: Command) -> Command:
    """Add `--anew`."""
    return click.option(
        "--anew", is_flag=True, help="Hear every take anew, also those that have not changed since."
    )(command)


def out_option(command: Command) -> Command:
    """Add `--out DIR`."""
    return click.option(
        "--out",
        type=FOLDER,
        metavar="DIR",
        help="Where files are written.  [default: reports/ and the session folder's name]",
    )(command)


def paper_option(what: str) -> Callable[[Command], Command]:
    """Add `--paper` for what is printed on a whole sheet, named by `what`."""
    return click.option(
        "--paper",
        type=click.Choice(("a4", "letter"), case_sensitive=False),
        default="a4",
        help=f"What {what} is printed on.  [default: a4]",
    )


def reports_folder(session: Path, out: Path | None) -> Path:
    """Return where a session's files go: what was asked for, or reports/ under the current folder."""
    return out if out is not None else Path("reports", session.resolve().name or "flute")
