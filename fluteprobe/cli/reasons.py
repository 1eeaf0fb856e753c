"""`measure --explain`: why a tone was given its register, reason by reason.

Conventions: odds are of the favoured register against the other two together, as "27 to 1".
"""

import textwrap
from collections.abc import Sequence
from difflib import get_close_matches
from math import exp
from pathlib import PurePosixPath

import click

from fluteprobe.cli.screen import WIDTH
from fluteprobe.session import printable
from fluteprobe.session.names import UnfitNameError, read_take_name
from fluteprobe.survey import Reading

_MOST_ODDS = 1000.0
_LONGEST_NAME = 100


def explained(readings: Sequence[Reading], take: str) -> str:
    """Return the reasons for the register of every tone of a take.

    A take is named as in the folder, with or without its ending, or by its fingering and breath in the plain
    form, whatever its file is called.

    Raises
    ------
    click.BadParameter
        If no take is called so; the message names the nearest.
    """
    wanted = _called(readings, take)
    if not wanted:
        stems = [PurePosixPath(reading.take).stem for reading in readings]
        near = get_close_matches(take[:_LONGEST_NAME], stems, n=1, cutoff=0.0)
        hint = f"; the nearest is {printable(near[0])}" if near else ", for nothing was heard in any"
        raise click.BadParameter(f"no take is called {printable(take)}{hint}")
    return "\n\n".join(_reasons(reading) for reading in readings if reading.take in wanted)


def _called(readings: Sequence[Reading], take: str) -> set[str]:
    """Return the takes of that name, or else those that are of the fingering, breath and number it says."""
    paths = {reading.take: PurePosixPath(reading.take) for reading in readings}
    named = {name for name, path in paths.items() if take in {name, path.name, path.stem}}
    if named:
        return named
    try:
        says = read_take_name(PurePosixPath(take).name)
    except UnfitNameError:
        return set()
    kind = (says.fingering, says.breath)
    alike = {reading.take for reading in readings if (reading.fingering, reading.breath) == kind}
    return {name for name in alike if says.number is None or says.number == _number(paths[name].name)}


def _number(name: str) -> int | None:
    """Return the number that a take's file name says."""
    try:
        return read_take_name(name).number or 1
    except UnfitNameError:
        return None


def _reasons(reading: Reading) -> str:
    tone, call = reading.tone, reading.call
    head = f"{printable(reading.take)}, {tone.start_s:.2f}–{tone.end_s:.2f} s"
    if tone.frequency_hz is None:
        return f"{head}: {tone.cautions[0]}"
    chances = ", ".join(f"{register} {100.0 * p:.1f} %" for register, p in sorted(call.probability.items()))
    verdict = "undecided" if call.register is None else f"register {call.register}"
    lines = [f"{head}, {tone.frequency_hz:.2f} Hz: {verdict} ({chances})"]
    for reason in sorted(call.evidence, key=lambda each: -each.log_odds):
        lines += _wrapped(f"for {reason.favours}, {_odds(reason.log_odds)}: {reason.source}: {reason.detail}")
    if call.caution is not None:
        lines += _wrapped(call.caution)
    return "\n".join(lines)


def _wrapped(text: str) -> list[str]:
    return textwrap.wrap(text, WIDTH, initial_indent="  ", subsequent_indent="    ")


def _odds(log_odds: float) -> str:
    odds = exp(min(log_odds, 50.0))
    return f"over {_MOST_ODDS:.0f} to 1" if odds > _MOST_ODDS else f"{odds:.3g} to 1"
