"""The register map, checked on the file itself. All surveys are invented."""

from collections import Counter
from collections.abc import Callable
from dataclasses import replace
from math import hypot, log2
from pathlib import Path
from xml.etree import ElementTree

import pytest
from matplotlib.figure import Figure
from on_page import check_page, labels_on, pdf_text, shapes_on
from pypdf import PdfReader
from surveys import (
    all_off,
    entry,
    first_register_only,
    heron,
    nothing_heard,
    one_take,
    reading,
    sixty_entries,
    strange_words,
)  # fmt: skip

from fluteprobe.pages.contents import note_text
from fluteprobe.pages.map import (
    SAME_RESONANCE_CENTS,
    axis_semitones,
    map_figures,
    map_rows,
    stretch_limit_cents,
    write_map,
)
from fluteprobe.pages.paper import HAIRLINE
from fluteprobe.sound.tone import BreathResonance
from fluteprobe.survey import Reading, Survey


def far_stretch() -> Survey:
    """Return a flute whose second register is a fourth wide of the octave at one fingering."""
    entries = (entry("xxxxxx", 1, 62, 0.0), entry("xxxxxx", 2, 79, 0.0), entry("xxxxxo", 1, 64, 0.0))
    return replace(first_register_only(), entries=entries)


def three_registers_close() -> Survey:
    """Return one fingering whose three registers lie within two semitones: names must find other places."""
    entries = tuple(entry("vxxxxx", register, 80 + register, 0.0) for register in (1, 2, 3))
    return replace(first_register_only(), entries=entries)


def ten_states() -> Survey:
    survey = one_take()
    facts = replace(survey.flute, holes=10)
    return replace(survey, flute=facts, entries=(entry("vhoxvhoxvh", 2, 80, 3.0),))


SURVEYS: list[Callable[[], Survey]] = [
    heron, one_take, nothing_heard, first_register_only, sixty_entries, strange_words, far_stretch,
    three_registers_close, ten_states,
]  # fmt: skip


def breathing(states: str, played_hz: float, *bumps_hz: float, width_hz: float = 30.0) -> Reading:
    """Return a reading of a tone whose breath shows resonances."""
    heard = reading(states, kind="tone", frequency_hz=played_hz)
    bumps = tuple(BreathResonance(frequency_hz=hz, width_hz=width_hz, prominence_db=10.0) for hz in bumps_hz)
    call = replace(heard.call, register=1)
    return replace(heard, call=call, tone=replace(heard.tone, breath_resonances=bumps))


@pytest.mark.parametrize("make", SURVEYS)
def test_pages_are_clean(make: Callable[[], Survey]) -> None:
    for page in map_figures(make()):
        check_page(page)


def test_pages_on_us_letter_are_clean() -> None:
    for page in map_figures(heron(), paper="letter"):
        check_page(page)


@pytest.mark.parametrize("make", [heron, sixty_entries, far_stretch, three_registers_close])
def test_every_pitch_and_stretch_can_be_read_out_of_the_pdf(
    make: Callable[[], Survey], tmp_path: Path
) -> None:
    survey = make()
    (target,) = write_map(survey, tmp_path / "map.pdf")
    words = Counter(pdf_text(target).split())
    assert all(words[str(e.fingering)] == 1 for e in survey.entries)
    notes = Counter(note_text(e.note) for e in survey.entries)
    assert all(words[note] >= times for note, times in notes.items())
    stretched = [e for e in survey.entries if e.stretch_cents is not None]
    known_first = {e.fingering for e in survey.entries if e.register == 1}
    assert all(f"{round(e.stretch_cents or 0):+d}".replace("-", "−") in words
               for e in stretched if e.fingering in known_first)  # fmt: skip


def test_sixty_fingerings_go_on_two_pages_of_even_length() -> None:
    rows = [
        sum(len(label.get_text()) == 10 and set(label.get_text()) <= set("xo") for label in labels_on(page))
        for page in map_figures(sixty_entries(), paper="letter")
    ]
    assert rows == [30, 30]


def test_rows_go_from_low_to_high_and_undecided_tones_are_among_them() -> None:
    rows = map_rows(heron())
    assert [row.base_hz for row in rows] == sorted(row.base_hz for row in rows)
    assert len({row.fingering for row in rows}) == len(rows)
    played = {e.fingering for e in heron().entries}
    undecided = {row.fingering.states for row in rows if row.fingering not in played}
    assert undecided == {"oxoxox", "xxoooh"}


def test_a_stretch_is_the_distance_from_the_multiple_with_both_uncertainties() -> None:
    low, octave, twelfth = (
        entry("xxxxxx", 1, 62, 0.0, uncertainty=3.0), entry("xxxxxx", 2, 74, 12.0, uncertainty=4.0),
        entry("xxxxxx", 3, 81, -20.0, uncertainty=0.0),
    )  # fmt: skip
    (row,) = map_rows(replace(one_take(), entries=(twelfth, low, octave)))
    two, three = row.stretches
    assert (two.register, three.register) == (2, 3)
    assert two.cents == pytest.approx(12.0)
    assert two.uncertainty_cents == pytest.approx(hypot(3.0, 4.0))
    just_twelfth = 1200.0 * log2(3.0)  # 1901.955 cents; the tempered one is 1900
    assert three.cents == pytest.approx(1900.0 - 20.0 - just_twelfth)


def test_breath_resonances_are_merged_and_never_stand_on_what_was_played() -> None:
    survey = replace(one_take(), entries=(entry("xxxxx", 1, 69, 0.0), entry("xxxxx", 2, 81, 10.0)))
    readings = (
        breathing("xxxxx", 440.0, 440.0, 700.0, 885.0, width_hz=60.0),
        breathing("xxxxx", 440.0, 705.0, 1300.0, width_hz=20.0),
        breathing("xxxxo", 500.0, 750.0),
    )
    (row,) = (r for r in map_rows(replace(survey, readings=readings)) if str(r.fingering) == "xxxxx")
    assert [(bump.frequency_hz, bump.width_hz) for bump in row.seen] == [(705.0, 20.0), (1300.0, 20.0)]
    for bump in row.seen:
        for e in row.played:
            assert abs(1200.0 * log2(bump.frequency_hz / e.frequency_hz)) > SAME_RESONANCE_CENTS


def bars_on(page: Figure) -> int:
    """Count the bars of breath resonances, the key's own left out."""
    filled = [shape for shape in shapes_on(page) if shape.get_facecolor() == rgba(HAIRLINE)]
    return len(filled) - 1


def rgba(colour: str) -> tuple[float, ...]:
    return (*(int(colour[k : k + 2], 16) / 255.0 for k in (1, 3, 5)), 1.0)


def test_a_breath_resonance_is_a_bar_and_one_above_the_axis_is_left_out() -> None:
    survey = replace(one_take(), entries=(entry("xxxxx", 1, 69, 0.0),))
    bare, seen, beyond = (
        replace(survey, readings=(breathing("xxxxx", 440.0, *bumps),))
        for bumps in ((), (700.0, 950.0), (3000.0,))
    )
    assert [bars_on(map_figures(s)[0]) for s in (bare, seen, beyond)] == [0, 2, 0]


def test_the_axis_holds_every_pitch_and_the_octave_over_the_highest_first_note() -> None:
    rows = map_rows(first_register_only())
    low, high = axis_semitones(rows, 440.0)
    first = [12.0 * log2(row.first_hz / 440.0) for row in rows if row.first_hz is not None]
    assert low == pytest.approx(min(first))
    assert high >= max(first) + 12.0


@pytest.mark.parametrize(
    ("cents", "limit"), [(0.0, 20.0), (19.0, 20.0), (25.0, 30.0), (90.0, 100.0), (400.0, 100.0)]
)
def test_the_lane_reaches_as_far_as_it_must(cents: float, limit: float) -> None:
    entries = (entry("xxxxx", 1, 69, 0.0), entry("xxxxx", 2, 81, cents))
    assert stretch_limit_cents(map_rows(replace(one_take(), entries=entries))) == limit


def test_text_in_the_svg_is_text(tmp_path: Path) -> None:
    (target,) = write_map(heron(), tmp_path / "map.svg")
    root = ElementTree.parse(target).getroot()  # noqa: S314 - our own file
    texts = {node.text for node in root.iter("{http://www.w3.org/2000/svg}text")}
    assert {"Heron", "register map", "oxxxxx"} <= texts


@pytest.mark.parametrize("suffix", [".pdf", ".svg"])
def test_the_same_survey_gives_the_same_bytes(tmp_path: Path, suffix: str) -> None:
    one, other = (write_map(all_off(20.0), tmp_path / f"{k}{suffix}")[0].read_bytes() for k in range(2))
    assert one == other


def test_the_pdf_names_its_flute(tmp_path: Path) -> None:
    (target,) = write_map(heron(), tmp_path / "map.pdf")
    facts = PdfReader(target).metadata
    assert facts is not None
    assert (facts.title, facts.author) == ("Heron: register map", "Osier & Reed")


def test_an_unknown_paper_is_refused() -> None:
    with pytest.raises(ValueError, match="paper is one of"):
        map_figures(one_take(), paper="a3")
