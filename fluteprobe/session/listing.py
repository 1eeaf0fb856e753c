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

from fluteprobe.session.files import LIST_FILE, TAKES_FOLDER, UnfitFileError, is_inside, read_text
from fluteprobe.session.names import (
    HIGHEST_NUMBER,
    TakeName,
    UnfitNameError,
    read_breath,
    read_fingering,
    same_name,
    split_ending,
)
from fluteprobe.session.words import UNSAFE, Problem, shown

COLUMNS = ("file", "fingering", "breath", "number")

_LARGEST_BYTES, _MOST_ROWS, _MOST_COLUMNS = 500_000, 5000, 100
_MOST_PROBLEMS, _MOST_COMPARED, _LONGEST_PATH = 50, 1000, 500
_DELIMITERS = (",", ";", "\t")
_DRIVE = re.compile(r"[A-Za-z]:|[/\\]|~[/\\]")

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
    except UnfitFileError as error:
        return (), (Problem(take=path.name, message=str(error)),)
    finder = _Finder(folder)
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
        If there are no rows, or no columns file and fingering.
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
    found = [(tuple(_column(cell) for cell in _cells(line, mark)), mark) for mark in _DELIMITERS]
    columns, mark = max(found, key=lambda read: len({column for column in read[0] if column}))
    missing = [column for column in COLUMNS[:2] if column not in columns]
    if len(columns) > _MOST_COLUMNS:
        raise UnfitFileError(f"line {number + 1}: has over {_MOST_COLUMNS} columns: is it another file?")
    if missing or any(columns.count(column) > 1 for column in COLUMNS):
        raise UnfitFileError(f"line {number + 1}: {_header_fault(_cells(line, mark), columns, missing)}")
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


def _read_row(
    line: int, cells: Cells | str, finder: "_Finder", holes: int
) -> tuple[Listed | None, list[str]]:
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
    match = re.fullmatch(r"0*([1-9][0-9]{0,3})(\.0*)?", text)
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


class _Finder:
    """Finds files of a session folder by what people write, never outside it; remembers what folders hold."""

    def __init__(self, folder: Path) -> None:
        self._folder = folder
        self._names: dict[PurePosixPath, list[str]] = {}
        self._misses = 0

    def find(self, text: str) -> PurePosixPath:
        """Return a file's path in the session folder.

        Raises
        ------
        UnfitNameError, UnfitFileError
            If nothing is written, or there is no such file inside the folder.
        """
        parts = [part for part in text.replace("\\", "/").split("/") if part not in {"", "."}]
        if not parts:
            raise UnfitNameError("the name of a recording")
        if UNSAFE.search(text) or len(text) > _LONGEST_PATH:
            raise UnfitFileError("is no name that a recording can have")
        if _DRIVE.match(text) or ".." in parts:
            raise UnfitFileError(f"leads out of the session folder: put the recording into {TAKES_FOLDER}")
        walked = (self._walk(base, parts) for base in (PurePosixPath(TAKES_FOLDER), PurePosixPath()))
        found = next((path for path in walked if path is not None), None)
        if found is None:
            raise UnfitFileError(f"is not there{self._nearest(parts[-1])}")
        if not is_inside(self._folder / found, self._folder):
            raise UnfitFileError(
                "is a link that leads out of the session folder: put the recording itself there"
            )
        if not (self._folder / found).is_file():
            raise UnfitFileError("is no ordinary file: put the recording itself there")
        return found

    def _walk(self, base: PurePosixPath, parts: Sequence[str]) -> PurePosixPath | None:
        """Follow the parts of a path from a folder; stop where it leads out, None where it leads nowhere."""
        here = base
        for part in parts:
            if not is_inside(self._folder / here, self._folder):
                return here
            names = self._in(here)
            same = [part] if part in names else [name for name in names if same_name(name) == same_name(part)]
            if not same and part is parts[-1]:
                same = [name for name in names if same_name(split_ending(name)[0]) == same_name(part)]
            if len(same) != 1:
                return None
            here /= same[0]
        return here

    def _in(self, folder: PurePosixPath) -> list[str]:
        """Return the names in a folder of the session, none where it is no folder."""
        if folder not in self._names:
            try:
                self._names[folder] = os.listdir(self._folder / folder)  # noqa: PTH208
            except OSError:
                self._names[folder] = []
        return self._names[folder]

    def _nearest(self, name: str) -> str:
        """Return a guess at the file that was meant; none any more where very many are not there."""
        self._misses += 1
        if self._misses > _MOST_PROBLEMS:
            return ""
        there = sorted(self._in(PurePosixPath(TAKES_FOLDER)))[:_MOST_COMPARED]
        near = get_close_matches(name, there, n=1)
        return f"; did you mean {shown(near[0])}?" if near else f": put it into {TAKES_FOLDER}"
