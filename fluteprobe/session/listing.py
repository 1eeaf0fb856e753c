"""takes.csv: recordings that keep their own names, each with its fingering and breath in a table.

Conventions: the first line names the columns: `file`, `fingering`, and, if wanted, `breath` and `number`;
others are passed over. Cells are parted by commas, semicolons or tabs, and may stand in quotes. A file is
looked for in takes/ first and then in the session folder, upper and lower case the same, its ending left out
or not. A row that cannot be used is a problem with its line; the others are used.
"""

import csv
import os
import re
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from difflib import get_close_matches
from pathlib import Path, PurePosixPath
from typing import TypeVar

from fluteprobe.session.files import LIST_FILE, UnfitFileError, read_text, require_recording
from fluteprobe.session.finder import Finder
from fluteprobe.session.names import (
    HIGHEST_NUMBER,
    TakeName,
    UnfitNameError,
    read_breath,
    read_fingering,
    same_name,
)
from fluteprobe.session.words import Problem, shown

COLUMNS = ("file", "fingering", "breath", "number")

_LARGEST_BYTES, _MOST_ROWS, _MOST_COLUMNS = 500_000, 1000, 100
_MOST_PROBLEMS, _LONGEST_HEADER = 50, 5000
_DELIMITERS = (",", ";", "\t")

Cells = Mapping[str, str]
T = TypeVar("T")


@dataclass(frozen=True, slots=True, kw_only=True)
class Listed:
    """A row of takes.csv that names a recording: its path in the session folder, and what it says of it.

    `take` is None where the row has a fault.
    """

    line: int
    file: PurePosixPath
    take: TakeName | None


class _HeaderError(ValueError):
    """A first line that does not name the columns; where it is and what is wrong with it."""

    def __init__(self, line: int, text: str) -> None:
        super().__init__(text)
        self.line = line


def read_listing(folder: Path, holes: int) -> tuple[tuple[Listed, ...], tuple[Problem, ...]]:
    """Return the recordings that takes.csv lists, in its order, and what is wrong in it, line by line.

    A file is returned once at most; where two rows disagree about it, without a take.
    """
    path = _list_file(folder)
    if path is None:
        return (), ()
    try:
        text = read_text(path, folder, _LARGEST_BYTES, "CSV (UTF-8)")
        columns, delimiter, first = _header(text)
    except _HeaderError as error:
        return (), (Problem(take=f"{path.name} line {error.line}", message=str(error)),)
    except UnfitFileError as error:
        return (), (Problem(take=path.name, message=str(error)),)
    finder = Finder(folder)
    listed: dict[PurePosixPath, Listed] = {}
    problems: list[Problem] = []
    for line, cells in _rows(text, columns, delimiter, first):
        row, faults = _read_row(line, cells, finder, holes)
        if row is not None and row.file in listed:
            faults.append(_twice(listed[row.file], row))
            listed[row.file] = _agreed(listed[row.file], row)
        elif row is not None:
            listed[row.file] = row
        problems += [Problem(take=f"{path.name} line {line}", message=fault) for fault in faults]
    return tuple(listed.values()), _first(problems, path.name)


def _list_file(folder: Path) -> Path | None:
    """Return the list of a session, also where its name is written in capitals, or None."""
    names = sorted(name for name in os.listdir(folder) if same_name(name) == LIST_FILE)  # noqa: PTH208
    return folder / (LIST_FILE if LIST_FILE in names else names[0]) if names else None


def _first(problems: Sequence[Problem], file: str) -> tuple[Problem, ...]:
    """Return the first problems where there are very many."""
    if len(problems) <= _MOST_PROBLEMS:
        return tuple(problems)
    more = len(problems) - _MOST_PROBLEMS
    return (
        *problems[:_MOST_PROBLEMS],
        Problem(take=file, message=f"has {more} more faults: correct these first"),
    )


# --- the table -----------------------------------------------------------------------------------------


def _header(text: str) -> tuple[tuple[str | None, ...], str, int]:
    """Return the column of each cell (None for others), what parts the cells, and the lines before the rows.

    Raises
    ------
    UnfitFileError
        If there is nothing in it, or far too much.
    _HeaderError
        If there are no columns file and fingering.
    """
    lines = text.split("\n")
    if len(lines) > _MOST_ROWS:
        raise UnfitFileError(f"has over {_MOST_ROWS} lines: is it another file?")
    number = next((k for k, line in enumerate(lines) if line.strip(" \t,;")), None)
    if number is None:
        raise UnfitFileError(f"is empty: its first line is {','.join(COLUMNS[:3])}")
    told = re.fullmatch(r"\s*sep=(.)\s*", lines[number])  # some spreadsheets write it before the table
    number += 1 if told else 0
    line = lines[number] if number < len(lines) else ""
    if len(line) > _LONGEST_HEADER:
        raise _HeaderError(number + 1, "is far too long: is it another file?")
    found = [(tuple(_column(cell) for cell in _cells(line, mark)), mark) for mark in _DELIMITERS]
    columns, mark = max(found, key=lambda read: (len({column for column in read[0] if column}), len(read[0])))
    missing = [column for column in COLUMNS[:2] if column not in columns]
    if len(columns) > _MOST_COLUMNS:
        raise _HeaderError(number + 1, f"has over {_MOST_COLUMNS} columns: is it another file?")
    if missing or any(columns.count(column) > 1 for column in COLUMNS):
        raise _HeaderError(number + 1, _header_fault(_cells(line, mark), columns, missing))
    return columns, mark, number + 1


def _column(cell: str) -> str | None:
    word = re.sub(r"[\W_]+", "", cell.lower())
    return {"filename": "file", "filenames": "file", "files": "file", "fingerings": "fingering"}.get(
        word, word if word in COLUMNS else None
    )


def _header_fault(cells: Sequence[str], columns: Sequence[str | None], missing: Sequence[str]) -> str:
    """Say what is wrong with the names of the columns."""
    found = shown(", ".join(cell for cell in cells if cell)) or "nothing"
    if not missing:
        return f"found {found}, expected each column once"
    fault = f"found {found}, expected the columns {', '.join(COLUMNS[:3])}"
    others = [
        cell.lower()[:40] for cell, column in zip(cells, columns, strict=True) if column is None and cell
    ]
    near = [(other, get_close_matches(other, missing, n=1)) for other in others]
    hints = [f"is {shown(other)} meant for {match[0]}?" for other, match in near if match]
    return "; ".join([fault, *hints])


def _rows(
    text: str, columns: Sequence[str | None], delimiter: str, first: int
) -> Iterator[tuple[int, Cells | str]]:
    """Return each row that is not blank with its line: its cells by column, or what is wrong with it."""
    for number, line in enumerate(text.split("\n")[first:], start=first + 1):
        if not line.strip(f' \t,;"{delimiter}'):
            continue
        cells = _cells(line, delimiter)
        if line.count('"') % 2:
            yield number, f"found {shown(line.strip())}, expected a second quote"
        elif any(cells[len(columns) :]):
            yield (
                number,
                (
                    f"found {len(cells)} cells, expected {len(columns)} as in the first line: "
                    f'put text with a {_named(delimiter)} in it into "quotes"'
                ),
            )
        else:
            padded = [*cells, *[""] * len(columns)]
            yield number, {name: cell for name, cell in zip(columns, padded, strict=False) if name}


def _cells(line: str, delimiter: str) -> list[str]:
    """Return the cells of one line; none goes on in the next."""
    try:
        cells = next(csv.reader([line], delimiter=delimiter, skipinitialspace=True), [])
    except csv.Error:
        return [line]
    return [cell.strip().strip("“”„").strip() for cell in cells]


def _named(delimiter: str) -> str:
    return {",": "comma", ";": "semicolon", "\t": "tab"}[delimiter]


# --- a row ---------------------------------------------------------------------------------------------


def _read_row(line: int, cells: Cells | str, finder: Finder, holes: int) -> tuple[Listed | None, list[str]]:
    """Return what a row says, without a take where it has a fault, and all its faults."""
    if isinstance(cells, str):
        return None, [cells]
    faults: list[str] = []
    file = _tried("file", cells, finder.find, faults)
    fingering = _tried("fingering", cells, lambda text: read_fingering(text, holes), faults)
    breath = _tried("breath", cells, read_breath, faults)
    number = _tried("number", cells, _number, faults)
    if file is None:
        return None, faults
    _tried("file", cells, lambda _: require_recording(finder.folder / file, finder.folder), faults)
    if faults or fingering is None or breath is None:
        return Listed(line=line, file=file, take=None), faults
    return Listed(
        line=line, file=file, take=TakeName(fingering=fingering, breath=breath, number=number)
    ), faults


def _tried(column: str, cells: Cells, read: Callable[[str], T], faults: list[str]) -> T | None:
    """Return what one cell says; None, and a fault more, where it cannot be used."""
    text = cells.get(column, "")
    try:
        return read(text)
    except UnfitNameError as error:
        faults.append(f"column {column}: found {shown(text) or 'nothing'}, expected {error}")
    except UnfitFileError as error:
        faults.append(f"column {column}: {shown(text)} {error}")
    return None


def _number(text: str) -> int | None:
    match = re.fullmatch(r"0*([1-9][0-9]{0,3})([.,]0*)?", text)
    if not text:
        return None
    if not match:
        raise UnfitNameError(f"a whole number from 1 to {HIGHEST_NUMBER}, or nothing")
    return int(match[1])


def _twice(first: Listed, row: Listed) -> str:
    """Say that a file is listed on two lines."""
    where = f"{row.file} is listed on line {first.line} already"
    if first.take is None or row.take is None or _same(first, row):
        return f"{where}: keep one of the two lines"
    return (
        f"{where}, as {first.take.stem}, and here as {row.take.stem}: not used; keep the line that is right"
    )


def _agreed(first: Listed, row: Listed) -> Listed:
    """Return what two rows say of a file: the first's, unless they disagree."""
    if first.take is None or row.take is None or _same(first, row):
        return first
    return Listed(line=first.line, file=first.file, take=None)


def _same(first: Listed, row: Listed) -> bool:
    kinds = [(each.take.fingering, each.take.breath) for each in (first, row) if each.take]
    return kinds[0] == kinds[-1]
