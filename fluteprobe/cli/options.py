"""Arguments and options that several commands share."""

from collections.abc import Callable, Collection
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


def formats_of(
    known: Collection[str],
) -> Callable[[click.Context, click.Parameter, tuple[str, ...]], tuple[str, ...]]:
    """Return what reads `--format`: each format once; several may stand in one word with commas."""

    def read(ctx: click.Context, param: click.Parameter, given: tuple[str, ...]) -> tuple[str, ...]:
        words = [word.strip().lower() for text in given for word in text.split(",")]
        for word in words:
            if word not in known:
                raise click.BadParameter(f"{word!r} is not one of {', '.join(known)}.", ctx, param)
        return tuple(dict.fromkeys(words))

    return read
