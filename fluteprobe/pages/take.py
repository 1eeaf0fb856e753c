"""A take's page: what was measured in one recording, and why it was read as it was.

At the top the waveform, its measured spans shaded; then each tone with its pitch track, its spectrum, what is
left of that without the partials, and in words the reasons for its register. It is the page to open when a
number looks wrong.

Conventions: lengths in millimetres, pitches in cents from the nearest note, positive is sharp, levels in dB
re the strongest partial, frequencies on an axis of octaves. A page holds up to three tones; type never
shrinks, panels do.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from math import exp
from pathlib import Path

import numpy as np
from matplotlib.colors import LinearSegmentedColormap
from matplotlib.figure import Figure
from matplotlib.path import Path as Outline
from matplotlib.transforms import Affine2D

from fluteprobe.flute.register import Evidence, Register
from fluteprobe.pages.contents import note_text
from fluteprobe.pages.frame import Head, draw_foot, draw_head
from fluteprobe.pages.panel import (
    DASH_MM,
    Panel,
    draw_area,
    draw_dashes,
    draw_line,
    draw_x_ticks,
    draw_y_ticks,
    octave_ticks,
    round_ticks,
)
from fluteprobe.pages.paper import (
    ACCENT,
    BAND,
    FINE_PT,
    FIRM_PT,
    HAIRLINE,
    INK,
    LABEL,
    MARGIN_MM,
    MINUS,
    QUIET,
    SMALL,
    WHITE,
    WING,
    Page,
    Type,
    clean,
    house_style,
    save_pages,
    width_mm,
    wrapped,
)
from fluteprobe.sound.second import STEP_CENTS, SecondOpinion
from fluteprobe.sound.tone import BreathResonance, Tone
from fluteprobe.sound.view import PitchView, SecondLook, SpectrumView, TakeView, ToneView
from fluteprobe.survey import Reading

MOST_ON_A_PAGE = 3
NARROWEST_PITCH_CENTS = 12.0
TUNED_IN_SIGHT_CENTS = 30.0  # the note itself is shown where the tone is no farther off
LEVELS_DB = (-100.0, -40.0)  # the spectrum's floor lies between these

_WAVE_MM = 17.0
_WAVE_BLOCK_MM = _WAVE_MM + 12.0
_HEADLINE_MM = 9.0
_OVER_PANEL_MM, _UNDER_PANEL_MM = 8.0, 6.5
_LEAST_PANEL_MM, _MOST_PANEL_MM = 22.0, 90.0
_PICTURE_SHARE = 0.8
_AXIS_MM = 10.0
_APART_MM = 6.0
_LINE_MM = 3.6
_MOST_LINES = 12
_KEY_MM = 11.0
_FOOT_MM = 5.0
_BREATH_RANGE_HZ = (100.0, 6000.0)
_DASHES = 40
_SPECTRUM_RATIOS = (0.24, 8.6)

_SMALL_BOLD = Type(size_pt=8.0, bold=True)
_HEADLINE = Type(size_pt=16.0)
_HEADLINE_SMALL = Type(size_pt=11.0)
_NAMES: dict[Register, str] = {1: "first", 2: "second", 3: "third"}
_KINDS = {"breath only": "breath only", "edge tone": "edge tone", "multiphonic": "several notes at once"}
_GREYS = LinearSegmentedColormap.from_list("fluteprobe", [WHITE, WING, INK])


def write_take(
    view: TakeView, readings: Sequence[Reading], target: Path, *, paper: str = "a4"
) -> tuple[Path, ...]:
    """Write a take's page as PDF, PNG or SVG, by the target's suffix; return the files written.

    Parameters
    ----------
    readings
        The readings of the view's tones, in the same order: their notes, registers and reasons.

    Raises
    ------
    ValueError
        If the paper or the suffix is not known, or the readings are not those of the view.
    """
    figures = take_figures(view, readings, paper=paper)
    return save_pages(figures, target, title=f"{_title(readings)}: what was heard", author=None)


def take_figures(view: TakeView, readings: Sequence[Reading], *, paper: str = "a4") -> list[Figure]:
    """Return the pages of a take as figures.

    Raises
    ------
    ValueError
        If the paper is not known, or the readings are not those of the view.
    """
    if [reading.tone for reading in readings] != [part.tone for part in view.tones]:
        raise ValueError("a take's page needs the readings of the tones in its view, in the same order")
    with house_style():
        page = Page(paper)
        column = 0.5 * (page.right_mm - MARGIN_MM - _APART_MM)
        blocks = [
            _block(k, part, reading, column)
            for k, (part, reading) in enumerate(zip(view.tones, readings, strict=True), start=1)
        ]
        parts = _shared_out(blocks, _room_mm(page))
        return [_draw_page(view, readings, paper, part, (k + 1, len(parts))) for k, part in enumerate(parts)]


# --- what is said of a tone --------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True, kw_only=True)
class Block:
    """One tone on the page: its number, its arrays and its words in two columns of lines."""

    number: int
    part: ToneView
    reading: Reading
    reasons: tuple[str, ...]
    facts: tuple[str, ...]
    cautions: tuple[str, ...]

    @property
    def fixed_mm(self) -> float:
        """The height of all that does not shrink."""
        lines = max(len(self.reasons), len(self.facts) + len(self.cautions))
        return _HEADLINE_MM + _OVER_PANEL_MM + _UNDER_PANEL_MM * self.stacked + _LINE_MM * lines + 6.0

    @property
    def stacked(self) -> int:
        """How many panels stand over one another."""
        return 1 if self.part.second is None else 2

    @property
    def panels(self) -> float:
        """The height of all panels, as a multiple of one's."""
        return 1.0 if self.part.second is None else 1.0 + _PICTURE_SHARE


def _block(number: int, part: ToneView, reading: Reading, column_mm: float) -> Block:
    tone = reading.tone
    told = [*tone.cautions, *([reading.call.caution] if reading.call.caution else [])]
    cautions = [line for caution in told for line in _lines(f"Caution: {clean(caution)}", column_mm)]
    facts = [line for fact in facts_in_words(part, reading) for line in _lines(fact, column_mm)]
    return Block(
        number=number,
        part=part,
        reading=reading,
        reasons=_no_more_than_fit(
            [line for said in reasons_in_words(reading) for line in _lines(said, column_mm)]
        ),
        facts=_no_more_than_fit(facts),
        cautions=_no_more_than_fit(cautions),
    )


def _lines(words: str, room_mm: float) -> list[str]:
    return wrapped(words.split(" "), SMALL, room_mm)


def _no_more_than_fit(lines: Sequence[str]) -> tuple[str, ...]:
    return tuple(lines) if len(lines) <= _MOST_LINES else (*lines[: _MOST_LINES - 1], "… and more")


def reasons_in_words(reading: Reading) -> list[str]:
    """Return why the register was decided, or not: how probable each is, then every reason with its odds."""
    if reading.tone.frequency_hz is None:
        return ["No steady tone was found, so there is no register to decide."]
    chances = ", ".join(f"{k}: {100.0 * p:.0f} %" for k, p in sorted(reading.call.probability.items()))
    register = reading.call.register
    decided = "Register undecided" if register is None else f"Why the {_NAMES[register]} register"
    return [f"{decided} ({chances})", *(_reason(evidence) for evidence in reading.call.evidence)]


def _reason(evidence: Evidence) -> str:
    source = clean(evidence.source)
    return f"{source[:1].upper()}{source[1:]}: {clean(evidence.detail)}; {odds_in_words(evidence)}"


def odds_in_words(evidence: Evidence) -> str:
    """Return how strongly a reason speaks for its register: natural log-odds as a bet."""
    odds = exp(min(evidence.log_odds, 20.0))
    if odds < 1.5:
        return f"hardly for register {evidence.favours}"
    bet = "over 1000" if odds > 1000.0 else f"{odds:.0f}" if odds >= 10.0 else f"{odds:.1f}"
    return f"{bet} to 1 for register {evidence.favours}"


def facts_in_words(part: ToneView, reading: Reading) -> list[str]:
    """Return what else was measured of a tone, a sentence each."""
    tone = reading.tone
    attack = "" if tone.attack_ms is None else f", attack {tone.attack_ms:.0f} ms"
    words = [f"measured from {tone.start_s:.2f} to {tone.end_s:.2f} s{attack}"]
    if tone.drift_cents is not None:
        swing = tone.vibrato
        vibrato = (
            "no vibrato" if swing is None else f"vibrato {swing.rate_hz:.1f} Hz, ±{swing.extent_cents:.0f}"
        )
        words.append(f"drift {_signed(tone.drift_cents)} cents, {vibrato}")
    if tone.harmonic_to_noise_db is not None:
        orders = _runs([partial.order for partial in tone.partials])
        words.append(f"tone {tone.harmonic_to_noise_db:.0f} dB over the noise; partials {orders or 'none'}")
    if tone.breath_resonances:
        words.append(
            "breath resonances: " + "; ".join(_resonance(tone, bump) for bump in tone.breath_resonances)
        )
    if part.second is not None:
        words.append(_opinion_in_words(part.second.opinion))
    return words


def _runs(orders: Sequence[int]) -> str:
    """Return whole numbers, low to high, with those that follow one another as a run: `1 to 4, 6`."""
    runs: list[list[int]] = []
    for order in orders:
        if runs and order == runs[-1][-1] + 1:
            runs[-1].append(order)
        else:
            runs.append([order])
    return ", ".join(f"{run[0]} to {run[-1]}" if len(run) > 1 else f"{run[0]}" for run in runs)


def _resonance(tone: Tone, bump: BreathResonance) -> str:
    ratio = (
        "" if tone.frequency_hz is None else f"{bump.frequency_hz / tone.frequency_hz:.2f} times the tone, "
    )
    return f"{bump.frequency_hz:.0f} Hz ({ratio}{bump.prominence_db:.0f} dB)"


def _opinion_in_words(opinion: SecondOpinion) -> str:
    if opinion.frequency_hz is None or opinion.difference_cents is None:
        return "pYIN hears no pitch here"
    apart = opinion.interval or f"{_signed(opinion.difference_cents)} cents from ours"
    return (
        f"pYIN reads {opinion.frequency_hz:.1f} Hz, {apart} "
        f"(on a grid of {STEP_CENTS:g} cents; so in {100.0 * opinion.share:.0f} % of its frames)"
    )


def _signed(cents: float) -> str:
    return f"{round(cents, 1) + 0.0:+.1f}".replace("-", MINUS)


def _title(readings: Sequence[Reading]) -> str:
    name = Path(readings[0].take).name if readings else ""
    return clean(name) or "A take without a name"


def _head(view: TakeView, readings: Sequence[Reading]) -> Head:
    first = readings[0] if readings else None
    fingering = "" if first is None or first.fingering is None else str(first.fingering)
    breath = {"soft": "blown softly", "normal": "blown normally", "over": "overblown"}
    channel = f"channel {view.channel + 1} of {view.channels}" if view.channels > 1 else ""
    blown = "" if first is None or first.breath is None else breath[first.breath]
    peak = f"loudest at {20.0 * np.log10(_loudest(view)):.0f} dB of full scale".replace("-", MINUS)
    parts = (fingering, blown, f"{view.duration_s:.2f} s at {view.rate_hz} Hz", channel, peak)
    tones = sum(reading.tone.frequency_hz is not None for reading in readings)
    return Head(
        title=_title(readings),
        kind="one take",
        facts="  ·  ".join(filter(None, parts)),
        summary=f"{tones or 'no'} tone{'' if tones == 1 else 's'}",
    )


# --- pages -------------------------------------------------------------------------------------------------


def _room_mm(page: Page) -> float:
    return page.bottom_mm - _FOOT_MM - _KEY_MM - (MARGIN_MM + 19.2) - _WAVE_BLOCK_MM


def _shared_out(blocks: Sequence[Block], room_mm: float) -> list[list[Block]]:
    """Return the tones page by page, up to three on one, fewer where their words need the room."""
    pages: list[list[Block]] = [[]]
    left = room_mm
    for block in blocks:
        least = block.fixed_mm + block.panels * _LEAST_PANEL_MM
        if pages[-1] and (least > left or len(pages[-1]) == MOST_ON_A_PAGE):
            pages.append([])
            left = room_mm
        pages[-1].append(block)
        left -= least
    return pages


def _draw_page(
    view: TakeView,
    readings: Sequence[Reading],
    paper: str,
    blocks: Sequence[Block],
    number: tuple[int, int],
) -> Figure:
    page = Page(paper)
    top = draw_head(page, _head(view, readings))
    _draw_waveform(page, view, top)
    top += _WAVE_BLOCK_MM
    spare = _room_mm(page) - sum(block.fixed_mm for block in blocks)
    panel_mm = min(_MOST_PANEL_MM, spare / max(sum(block.panels for block in blocks), 1.0))
    for block in blocks:
        _draw_block(page, block, top, panel_mm)
        top += block.fixed_mm + block.panels * panel_mm
    _draw_key(page, page.bottom_mm - _FOOT_MM - _KEY_MM + 4.0, second=any(b.part.second for b in blocks))
    draw_foot(page, *number)
    return page.figure


def _loudest(view: TakeView) -> float:
    """Return the largest swing of a recording, full scale being 1."""
    return max(float(np.max(np.abs([view.waveform.low, view.waveform.high]))), 1e-6)


def _draw_waveform(page: Page, view: TakeView, top: float) -> None:
    """Draw the envelope of the whole recording over its measured spans, which are numbered."""
    wave = view.waveform
    loudest = _loudest(view)
    panel = Panel(
        left_mm=MARGIN_MM, top_mm=top + 4.0, width_mm=page.right_mm - MARGIN_MM, height_mm=_WAVE_MM,
        across=(0.0, view.duration_s), up=(-loudest, loudest),
    )  # fmt: skip
    free_mm = 0.0
    for number, part in enumerate(view.tones, start=1):
        (left, _), (right, _) = (panel.point_mm(s, 0.0) for s in (part.tone.start_s, part.tone.end_s))
        page.box((left, panel.top_mm), (right - left, _WAVE_MM), BAND)
        for edge in (left, right):
            page.line((edge, panel.top_mm), (edge, panel.bottom_mm), colour=QUIET)
        half = 0.5 * width_mm(str(number), SMALL)
        if 0.5 * (left + right) - half > free_mm:
            page.text(0.5 * (left + right), panel.top_mm - 1.0, str(number), SMALL, align="center")
            free_mm = 0.5 * (left + right) + half + 1.0
    time = np.minimum((np.arange(len(wave.low)) + 0.5) * wave.column_s, view.duration_s)
    draw_area(page, panel, time, (wave.low, wave.high), QUIET)
    draw_line(page, panel, time, 0.5 * (wave.low + wave.high), colour=QUIET, pt=0.3)
    draw_x_ticks(page, panel, _seconds(panel.across, most=10))


# --- one tone ----------------------------------------------------------------------------------------------


def _draw_block(page: Page, block: Block, top: float, panel_mm: float) -> None:
    page.line((MARGIN_MM, top), (page.right_mm, top))
    _draw_headline(page, block, top + 6.6)
    panel_top = top + _HEADLINE_MM + _OVER_PANEL_MM
    column = 0.5 * (page.right_mm - MARGIN_MM - _APART_MM)
    right = MARGIN_MM + column + _APART_MM
    spectrum_mm = panel_mm * block.panels + _UNDER_PANEL_MM * (block.stacked - 1)
    if block.part.pitch is not None:
        _draw_pitch(page, block, _frame(MARGIN_MM, panel_top, column, panel_mm))
    if block.part.second is not None:
        picture_top = panel_top + panel_mm + _UNDER_PANEL_MM
        _draw_picture(
            page, block.part.second, _frame(MARGIN_MM, picture_top, column, _PICTURE_SHARE * panel_mm)
        )
    if block.part.spectrum is not None:
        left, wide = (
            (right, column) if block.part.pitch is not None else (MARGIN_MM, 2.0 * column + _APART_MM)
        )
        _draw_spectrum(
            page, block.reading.tone, block.part.spectrum, _frame(left, panel_top, wide, spectrum_mm)
        )
    words_top = panel_top + spectrum_mm + _UNDER_PANEL_MM + 3.0
    _draw_lines(page, MARGIN_MM, words_top, block.reasons, INK, headed=True)
    _draw_lines(page, right, words_top, block.facts, INK)
    _draw_lines(page, right, words_top + _LINE_MM * len(block.facts), block.cautions, ACCENT)


def _frame(left: float, top: float, width: float, height: float) -> Panel:
    """Return an empty panel with room for the names of its heights on the left."""
    return Panel(
        left_mm=left + _AXIS_MM, top_mm=top, width_mm=width - _AXIS_MM, height_mm=height,
        across=(0.0, 1.0), up=(0.0, 1.0),
    )  # fmt: skip


def _draw_lines(  # noqa: PLR0913 - a place, a colour and a heading are all of them needed
    page: Page, x: float, y: float, lines: Sequence[str], colour: str, *, headed: bool = False
) -> None:
    for k, line in enumerate(lines):
        page.text(x, y + k * _LINE_MM, line, _SMALL_BOLD if headed and k == 0 else SMALL, colour=colour)


def _draw_headline(page: Page, block: Block, baseline: float) -> None:
    """Write a tone's number, note, deviation, frequency and register."""
    reading, tone = block.reading, block.reading.tone
    number, x = str(block.number), MARGIN_MM
    page.text(x, baseline, number, _HEADLINE_SMALL, colour=QUIET)
    x += width_mm(number, _HEADLINE_SMALL) + 4.0
    note = _KINDS["breath only"] if reading.note is None else note_text(reading.note)
    page.text(x, baseline, note, _HEADLINE)
    x += width_mm(note, _HEADLINE) + 5.0
    if reading.cents is not None and tone.frequency_hz is not None:
        sure = "?" if tone.uncertainty_cents is None else f"{max(tone.uncertainty_cents, 0.1):.1f}"
        words = f"{_signed(reading.cents)} ±{sure} cents   {tone.frequency_hz:.2f} Hz"
        page.text(x, baseline, words, _HEADLINE_SMALL)
    if tone.frequency_hz is not None:
        register = reading.call.register
        words = "register undecided" if register is None else f"{_NAMES[register]} register"
        kind = f"{_KINDS[tone.kind]}, " if tone.kind in _KINDS else ""
        page.text(page.right_mm, baseline, f"{kind}{words}", _HEADLINE_SMALL, align="right")


def _draw_pitch(page: Page, block: Block, frame: Panel) -> None:
    """Draw the pitch track: points, smooth curve, mean with its uncertainty, and the note where in sight."""
    pitch, reading, second = block.part.pitch, block.reading, block.part.second
    assert pitch is not None and reading.cents is not None and reading.note is not None  # noqa: S101, PT018
    mean, sure = reading.cents, reading.tone.uncertainty_cents or 0.0
    low, high = _pitch_range(pitch, mean, sure)
    across = (second.start_s, second.end_s) if second else (reading.tone.start_s, reading.tone.end_s)
    panel = _ranged(frame, across, (low, high))
    _, upper = panel.point_mm(across[0], mean + sure)
    _, lower = panel.point_mm(across[0], mean - sure)
    page.box((panel.left_mm, upper), (panel.width_mm, lower - upper), BAND)
    draw_y_ticks(page, panel, round_ticks(low, high, _most_ticks(frame), signed=True))
    if low < 0.0 < high:
        _, y = panel.point_mm(across[0], 0.0)
        page.line((panel.left_mm, y), (panel.right_mm, y), colour=QUIET, pt=FINE_PT)
    draw_line(page, panel, pitch.time_s, mean + pitch.cents, colour=WING, pt=0.7)
    if second is not None and second.opinion.difference_cents is not None:
        heard = np.full(_DASHES, mean + second.opinion.difference_cents)
        draw_dashes(page, panel, np.linspace(*across, _DASHES), heard, colour=ACCENT)
    draw_line(page, panel, pitch.smooth_time_s, mean + pitch.smooth_cents, pt=FIRM_PT)
    draw_x_ticks(page, panel, _seconds(across))
    over = f"pitch, cents from {note_text(reading.note)}"
    page.text(panel.left_mm, panel.top_mm - 1.6, over, LABEL, colour=QUIET)


def _pitch_range(pitch: PitchView, mean: float, sure: float) -> tuple[float, float]:
    """Return the cents that a pitch panel shows: the track, its uncertainty, and the note if not far off."""
    tracked = np.percentile(pitch.cents, [3.0, 97.0]) + mean
    smooth = pitch.smooth_cents + mean
    values = [*tracked.tolist(), float(smooth.min()), float(smooth.max()), mean - sure, mean + sure]
    if abs(mean) <= TUNED_IN_SIGHT_CENTS:
        values.append(0.0)
    low, high = min(values), max(values)
    spare = max(0.5 * (NARROWEST_PITCH_CENTS - (high - low)), 0.08 * (high - low))
    return low - spare, high + spare


def _most_ticks(frame: Panel) -> int:
    return max(5, int(frame.height_mm / 6.5))


def _seconds(across: tuple[float, float], most: int = 6) -> list[tuple[float, str]]:
    """Return ticks of time whose words stay inside the panel."""
    spare = 0.25 * (across[1] - across[0]) / most
    ticks = round_ticks(*across, most)
    return [(at, f"{words} s") for at, words in ticks if across[0] + spare <= at <= across[1] - spare]


def _ranged(
    frame: Panel, across: tuple[float, float], up: tuple[float, float], *, log_x: bool = False
) -> Panel:
    return Panel(
        left_mm=frame.left_mm, top_mm=frame.top_mm, width_mm=frame.width_mm, height_mm=frame.height_mm,
        across=across, up=up, log_x=log_x,
    )  # fmt: skip


def _draw_picture(page: Page, second: SecondLook, frame: Panel) -> None:
    """Draw librosa's constant-Q picture, dark is loud, on the pitch panel's axis of time."""
    across, picture = (second.start_s, second.end_s), second.picture
    panel = _ranged(frame, across, (float(np.log2(picture.lowest_hz)), float(np.log2(picture.highest_hz))))
    left, bottom = panel.left_mm / page.width_mm, 1.0 - panel.bottom_mm / page.height_mm
    axes = page.figure.add_axes(
        (left, bottom, panel.width_mm / page.width_mm, panel.height_mm / page.height_mm)
    )
    axes.set_axis_off()
    axes.imshow(picture.level_db, cmap=_GREYS, aspect="auto", origin="lower", interpolation="nearest")
    for value, words in octave_ticks(picture.lowest_hz, picture.highest_hz):
        _, y = panel.point_mm(across[0], float(np.log2(value)))
        page.text(panel.left_mm - 1.5, y + 1.0, words, LABEL, align="right", colour=QUIET)
    over = "librosa's constant-Q picture, Hz"
    page.text(panel.left_mm, panel.bottom_mm + 3.8, over, LABEL, colour=QUIET)


def _draw_spectrum(page: Page, tone: Tone, spectrum: SpectrumView, frame: Panel) -> None:
    """Draw the averaged spectrum, the noise under it, the partials and the breath resonances."""
    highest = float(spectrum.frequency_hz[-1])
    if tone.frequency_hz is None:
        across = (_BREATH_RANGE_HZ[0], min(_BREATH_RANGE_HZ[1], highest))
    else:
        low, high = (ratio * tone.frequency_hz for ratio in _SPECTRUM_RATIOS)
        across = (low, min(high, highest))
    panel = _ranged(frame, across, _levels(spectrum, across), log_x=True)
    floor = np.full(len(spectrum.noise_db), panel.up[0])
    draw_area(page, panel, spectrum.frequency_hz, (floor, spectrum.noise_db), HAIRLINE)
    draw_y_ticks(page, panel, round_ticks(*panel.up, _most_ticks(frame)))
    draw_line(page, panel, spectrum.frequency_hz, spectrum.level_db, pt=0.6)
    for partial in tone.partials:
        if panel.holds(partial.frequency_hz):
            page.path(_disc(*panel.point_mm(partial.frequency_hz, partial.level_db), 0.75), fill=INK)
    _draw_resonances(page, panel, tone, spectrum)
    draw_x_ticks(page, panel, [(hz, words) for hz, words in octave_ticks(*across) if _is_clear(panel, hz)])
    page.text(panel.left_mm, panel.top_mm - 5.0, "level, dB re the strongest", LABEL, colour=QUIET)
    page.text(panel.right_mm, panel.bottom_mm + 3.8, "Hz", LABEL, align="right", colour=QUIET)


def _is_clear(panel: Panel, frequency_hz: float) -> bool:
    """Whether a frequency's name stays clear of the unit at the panel's right end."""
    return panel.point_mm(frequency_hz, panel.up[0])[0] < panel.right_mm - 8.0


def _levels(spectrum: SpectrumView, across: tuple[float, float]) -> tuple[float, float]:
    inside = (spectrum.frequency_hz >= across[0]) & (spectrum.frequency_hz <= across[1])
    quietest = float(np.percentile(spectrum.noise_db[inside], 5.0)) if inside.any() else LEVELS_DB[0]
    low = 10.0 * np.floor(min(max(quietest - 5.0, LEVELS_DB[0]), LEVELS_DB[1]) / 10.0)
    return float(low), 5.0


def _draw_resonances(page: Page, panel: Panel, tone: Tone, spectrum: SpectrumView) -> None:
    """Point at each breath resonance from above; its ratio to the tone is written where there is room."""
    free_mm = panel.left_mm
    for bump in tone.breath_resonances:
        if not panel.holds(bump.frequency_hz):
            continue
        line = min(round(bump.frequency_hz / spectrum.line_hz), len(spectrum.noise_db) - 1)
        x, y = panel.point_mm(bump.frequency_hz, float(spectrum.noise_db[line]))
        page.path(_pointer(x, y - 0.6), fill=WHITE, edge=INK, pt=FINE_PT)
        page.line((x, panel.top_mm), (x, y - 3.0), colour=WING, pt=FINE_PT)
        words = f"{bump.frequency_hz / (tone.frequency_hz or bump.frequency_hz):.2f}"
        half = 0.5 * width_mm(words, LABEL)
        if tone.frequency_hz is not None and x - half >= free_mm and x + half <= panel.right_mm:
            page.text(x, panel.top_mm - 1.0, words, LABEL, align="center")
            free_mm = x + half + 1.0


def _disc(x: float, y: float, radius: float) -> Outline:
    return Outline.unit_circle().transformed(Affine2D().scale(radius).translate(x, y))


def _pointer(x: float, y: float) -> Outline:
    """Return a small wedge that points down at a place."""
    return Outline([(x, y), (x - 0.9, y - 2.0), (x + 0.9, y - 2.0), (x, y)], closed=True)


# --- the key -----------------------------------------------------------------------------------------------


def _draw_key(page: Page, top: float, *, second: bool) -> None:
    """Say what each mark means, in one line for pitch and one for the spectrum."""
    page.line((MARGIN_MM, top - 3.6), (page.right_mm, top - 3.6))
    x = MARGIN_MM
    for colour, pt, words in ((WING, 0.7, "pitch, every 25 ms"), (INK, FIRM_PT, "smooth")):
        page.line((x, top), (x + 5.0, top), colour=colour, pt=pt)
        x = _key_words(page, x + 6.4, top, words)
    page.box((x, top - 1.1), (5.0, 2.2), BAND)
    x = _key_words(page, x + 6.4, top, "measured span, and the pitch with its uncertainty (standard, k = 1)")
    if second:
        for k in range(3):
            page.line((x + 1.8 * k, top), (x + 1.8 * k + DASH_MM, top), colour=ACCENT, pt=0.9)
        _key_words(page, x + 6.0, top, "pYIN's mean")
    x, y = MARGIN_MM, top + 4.6
    page.line((x, y), (x + 5.0, y), colour=INK, pt=0.6)
    x = _key_words(page, x + 6.4, y, "spectrum")
    page.box((x, y - 1.1), (5.0, 2.2), HAIRLINE)
    x = _key_words(page, x + 6.4, y, "noise: what is left without the partials")
    page.path(_disc(x + 0.8, y, 0.75), fill=INK)
    x = _key_words(page, x + 3.0, y, "partial")
    page.path(_pointer(x + 0.9, y + 1.0), fill=WHITE, edge=INK, pt=FINE_PT)
    _key_words(page, x + 3.2, y, "breath resonance, with its ratio to the tone")


def _key_words(page: Page, x: float, y: float, words: str) -> float:
    page.text(x, y + 1.0, words, LABEL, colour=QUIET)
    return x + width_mm(words, LABEL) + 4.0
