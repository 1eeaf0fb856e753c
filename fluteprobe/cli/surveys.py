"""Surveys named on the command line: session folders, reports folders and measurements.json files.

A session folder is measured: what was heard before is kept in its folder under reports/, so that only new
and changed takes are heard (see `measure`). A folder without flute.toml but with a measurements.json, and
such a file itself, are read as they are.
"""

from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from fluteprobe.cli.measure import measured
from fluteprobe.cli.options import reports_folder

if TYPE_CHECKING:
    from fluteprobe.survey import Survey

MEASUREMENTS = "measurements.json"


@dataclass(frozen=True, slots=True, kw_only=True)
class Gathered:
    """Surveys with the names of what they came from, and a line for each input that could not be used."""

    surveys: "tuple[Survey, ...]"
    names: tuple[str, ...]
    faults: tuple[str, ...]


def gathered(paths: Iterable[Path]) -> Gathered:
    """Return the surveys at some paths; what cannot be used is a fault, and so is what is given twice."""
    from fluteprobe.results import ResultsError
    from fluteprobe.session import SessionError, printable

    found: list[tuple[str, Survey]] = []
    faults: list[str] = []
    seen: set[Path] = set()
    for path in paths:
        place = path.resolve()
        if place in seen:
            faults.append(f"{printable(str(path))} is given twice: it is compared once")
            continue
        seen.add(place)
        try:
            survey, unused = _survey_at(path)
        except ResultsError as error:
            faults.append(str(error))
        except SessionError as error:
            faults += error.faults
        else:
            found.append((_name(place), survey))
            faults += unused
    return Gathered(
        surveys=tuple(survey for _, survey in found),
        names=tuple(name for name, _ in found),
        faults=tuple(faults),
    )


def _name(place: Path) -> str:
    """Return what a survey is called: its folder, or its file where that is not called measurements.json."""
    if place.name == MEASUREMENTS:
        return place.parent.name
    return place.stem if place.suffix == ".json" else place.name


def _survey_at(path: Path) -> "tuple[Survey, list[str]]":
    """Return the survey at a path, and a line for each take that was heard now and could not be used."""
    from fluteprobe.results import read_results
    from fluteprobe.session import FACTS_FILE, printable

    if path.is_file() or path.suffix == ".json":
        return read_results(path), []
    if (path / MEASUREMENTS).exists() and not (path / FACTS_FILE).exists():
        return read_results(path / MEASUREMENTS), []
    survey = measured(path, reports_folder(path, None))
    where = printable(str(path))
    return survey, [f"{where}: {printable(p.take)}: {printable(p.message)}" for p in survey.problems]
