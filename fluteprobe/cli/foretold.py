"""What `fluteprobe forecast` says in a terminal: plain aligned text, at most 80 columns.

Conventions: deviations in cents with a sign, ± the standard uncertainty; chances in per cent.
"""

import textwrap
from collections.abc import Iterable, Mapping, Sequence
from statistics import median

from fluteprobe.cli.columns import aligned
from fluteprobe.cli.screen import WIDTH
from fluteprobe.flute.fingering import Fingering
from fluteprobe.flute.sensitivity import CHANGE_MM, Measure, Sensitivity
from fluteprobe.flute.tuning import cents_between
from fluteprobe.forecast.contract import CAUTIONS
from fluteprobe.forecast.values import Disagreement, FitWords, Forecast, Prediction
from fluteprobe.session import printable

_SHOWN = 12
_LEAST_CHANGE_CENTS = 0.1

Line = Sequence[str]


def told(forecast: Forecast, *, show_all: bool, maker: bool) -> str:
    """Return what to try next, how well the forecast did so far, the tube, and what a maker asked for."""
    rest = [each for each in forecast.predictions if each.rank is None and each.measured_hz is None]
    blocks = [
        [_heading(forecast)],
        _next_lines([each for each in forecast.predictions if each.rank is not None], show_all=show_all),
        ["Will hardly speak", *_foretold_table(rest)] if show_all and rest else [],
        _played_lines([each for each in forecast.predictions if each.measured_hz is not None]),
        [] if forecast.fit is None else _fit_lines(forecast.fit),
        _disagreement_lines(forecast.disagreements),
        _maker_lines(forecast.sensitivities) if maker else [],
    ]
    return "\n\n".join("\n".join(lines) for lines in blocks if lines)


def unfit_told(forecast: Forecast) -> str:
    """Return why there is no forecast, and which takes disagree most."""
    lines = _wrapped(f"No forecast: {forecast.reason}")
    return "\n".join([*lines, *(f"  {_disagreement(each)}" for each in forecast.disagreements)])


def _heading(forecast: Forecast) -> str:
    parts = [f"{forecast.flute.holes} hole{'s' if forecast.flute.holes > 1 else ''}"]
    parts.append(f"A4 = {forecast.sitting.a4_hz:g} Hz")
    if forecast.sitting.air_temperature_c is not None:
        parts.append(f"air {forecast.sitting.air_temperature_c:g} °C")
    tail = " · ".join(["", *parts])
    name, room = printable(forecast.flute.name), WIDTH - len(tail)
    return (name if len(name) <= room else f"{name[: room - 1]}…") + tail


# --- predictions -------------------------------------------------------------------------------------


def _next_lines(predictions: Sequence[Prediction], *, show_all: bool) -> list[str]:
    shown = predictions if show_all else predictions[:_SHOWN]
    if not predictions:
        return ["Nothing more to try: what was not played yet will hardly speak."]
    return [
        "What to try next, best first",
        *_foretold_table(shown),
        *([f"  and {len(predictions) - len(shown)} more: --all"] if len(shown) < len(predictions) else []),
        "",
        *_wrapped(
            "cents: off the note as it should sound, ± standard uncertainty; speaks: how likely, overblown; "
            "fills: a note above the first register that nothing played so far gives"
        ),
    ]


def _foretold_table(predictions: Iterable[Prediction]) -> list[str]:
    titles = ("fingering", "register", "note", "cents", "speaks", "from", "fills")
    rows = [
        (
            str(each.fingering),
            str(each.register),
            _note(each.note),
            f"{_signed(each.cents)} ± {each.uncertainty_cents:2.0f}",
            f"{100.0 * each.likely_to_speak:.0f} %",
            each.basis,
            _note(each.fills or ""),
        )
        for each in predictions
    ]
    return _indented(aligned([titles, *rows], numbers={1, 3, 4}))


def _played_lines(predictions: Sequence[Prediction]) -> list[str]:
    """Return what was foretold of notes that were played, without their own tones, and how far off it is."""
    if not predictions:
        return []
    titles = ("fingering", "register", "foretold Hz", "played Hz", "off by")
    rows, off = [], []
    for each in predictions:
        assert each.measured_hz is not None  # noqa: S101  (the caller asked)
        off.append(cents_between(each.measured_hz, each.frequency_hz))
        foretold = f"{each.frequency_hz:.1f} ± {each.uncertainty_cents:2.0f} cents"
        rows.append(
            (str(each.fingering), str(each.register), foretold, f"{each.measured_hz:.1f}", _signed(off[-1]))
        )
    middle = median(abs(cents) for cents in off)
    return [
        "Foretold from the rest, and played",
        *_indented(aligned([titles, *rows], numbers={1, 2, 3, 4})),
        f"half of them within {middle:.1f} cents",
    ]


# --- the tube ----------------------------------------------------------------------------------------


def _fit_lines(fit: FitWords) -> list[str]:
    tube = fit.tube
    where = "below" if tube.maximum_below_top_hole_mm.value >= 0.0 else "above"
    away = Measure(
        value=abs(tube.maximum_below_top_hole_mm.value),
        uncertainty=tube.maximum_below_top_hole_mm.uncertainty,
    )
    rows = [
        ("sound hole to foot", _length(tube.length_mm)),
        ("bore", _length(tube.bore_mm)),
        ("the sound hole adds", _length(tube.head_correction_mm)),
        ("the foot adds", _length(tube.foot_correction_mm)),
        ("effective length", _length(tube.effective_length_mm)),
        ("pressure swings most", f"{_length(tube.pressure_maximum_mm)} from the sound hole, all closed"),
        ("", f"{_length(away)} {where} the top hole"),
        ("stretch, all closed", _stretch(tube.stretch_cents)),
    ]  # fmt: skip
    return [
        "The tube that fits: an estimate, exact only where flute.toml gives dimensions",
        *_indented(aligned(rows)),
        *_wrapped(
            f"fitted to {fit.tones} tones and {fit.breath_resonances} breath resonances; a tone lies "
            f"{fit.misfit_cents:.0f} cents from what the others foretell"
        ),
    ]


def _length(measure: Measure) -> str:
    return f"{measure.value:.1f} ± {max(measure.uncertainty, 0.1):.1f} mm"


def _stretch(measure: Measure) -> str:
    return f"{_signed(measure.value)} ± {max(measure.uncertainty, 0.1):.1f} cents"


def _disagreement_lines(disagreements: Sequence[Disagreement]) -> list[str]:
    if not disagreements:
        return []
    told = [f"  {_disagreement(each)}" for each in disagreements]
    return ["Worth recording anew, for all others disagree", *told]


def _disagreement(disagreement: Disagreement) -> str:
    off = disagreement.deviation_cents
    where = "above" if off > 0.0 else "below"
    return (
        f"{printable(disagreement.take)}: register {disagreement.register} is {abs(off):.0f} cents {where} "
        "what all others foretell"
    )


# --- for the maker -----------------------------------------------------------------------------------


def _maker_lines(changes: Sequence[Sensitivity]) -> list[str]:
    """Return what a change of each hole does to the notes that it moves, both registers side by side."""
    notes: dict[tuple[int, Fingering], dict[int, Sensitivity]] = {}
    for each in changes:
        notes.setdefault((each.hole, each.fingering), {})[each.register] = each
    rows = [
        (str(hole), str(fingering), *_changes(registers, "wider_cents"), *_changes(registers, "lower_cents"))
        for (hole, fingering), registers in notes.items()
        if any(_moves(each) for each in registers.values())
    ]
    how = f"{CHANGE_MM:g} mm"
    titles = [
        ("", "", f"{how} wider", "", f"{how} to the foot", ""),
        ("hole", "fingering", "register 1", "register 2", "register 1", "register 2"),
    ]
    return [
        "For the maker: estimates in cents, for a small change of one hole",
        *_indented(aligned([*titles, *rows], numbers={0})),
        *_wrapped(
            "holes are counted from the mouth; "
            f"what moves by less than {_LEAST_CHANGE_CENTS:g} cents is left out"
        ),
        "",
        *(line for caution in CAUTIONS for line in _wrapped(caution)),
    ]


def _moves(change: Sensitivity) -> bool:
    moves = max(abs(change.wider_cents.value), abs(change.lower_cents.value))
    return moves >= _LEAST_CHANGE_CENTS


def _changes(registers: Mapping[int, Sensitivity], key: str) -> Iterable[str]:
    for register in (1, 2):
        measure: Measure | None = getattr(registers.get(register), key, None)
        yield "" if measure is None else f"{_signed(measure.value, 2)} ± {measure.uncertainty:.2f}"


# --- words -------------------------------------------------------------------------------------------


def _indented(lines: Sequence[str]) -> list[str]:
    return [f"  {line}" for line in lines]


def _wrapped(text: str) -> list[str]:
    return textwrap.wrap(text, WIDTH, subsequent_indent="  ", break_on_hyphens=False)


def _note(note: str) -> str:
    return note.replace("#", "♯")


def _signed(cents: float, digits: int = 1) -> str:
    return f"{round(cents, digits) + 0.0:+.{digits}f}".replace("-", "−")
