"""A take's page, checked on the file itself. The tones are made, their truth is known by construction."""

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import soundfile
from matplotlib.figure import Figure
from numpy.typing import NDArray
from on_page import check_page, labels_on, pdf_text
from pypdf import PdfReader
from tones import RATE_HZ

from fluteprobe.flute.evidence import Evidence
from fluteprobe.flute.fingering import Fingering
from fluteprobe.pages.panel import Panel, octave_ticks, round_ticks
from fluteprobe.pages.take import odds_in_words, take_figures, write_take
from fluteprobe.sound.picture import Picture
from fluteprobe.sound.recording import open_recording
from fluteprobe.sound.second import SecondOpinion
from fluteprobe.sound.tone import BreathResonance, Kind
from fluteprobe.sound.view import SecondLook, TakeView, look
from fluteprobe.survey import Reading, hear

Floats = NDArray[np.float64]
Take = tuple[TakeView, tuple[Reading, ...]]


def note(frequency_hz: float, seconds: float) -> Floats:
    """Return a tone with a soft start and end and breath noise, 10 dB under full scale."""
    time_s = np.arange(round(seconds * RATE_HZ)) / RATE_HZ
    tone = sum(
        a * np.cos(2 * np.pi * k * frequency_hz * time_s + k) for k, a in enumerate((1, 0.2, 0.1), start=1)
    )
    envelope = np.clip(np.minimum(time_s, seconds - time_s) / 0.04, 0.0, 1.0)
    noise = np.random.default_rng(round(frequency_hz)).standard_normal(len(time_s))
    return np.asarray(0.3 * envelope * (tone + 0.02 * noise))


def pause(seconds: float) -> Floats:
    return 1e-4 * np.random.default_rng(5).standard_normal(round(seconds * RATE_HZ))


def taken(folder: Path, name: str, *parts: Floats, channels: int = 1) -> Take:
    """Write a recording, hear it, and look at it."""
    samples = np.concatenate([pause(0.2), *(piece for part in parts for piece in (part, pause(0.3)))])
    path = folder / name
    silent = [np.zeros(len(samples))] * (channels - 1)
    soundfile.write(path, np.stack([*silent, samples], axis=1), RATE_HZ, subtype="FLOAT")
    readings = hear(path)
    return look(open_recording(path), [reading.tone for reading in readings]), readings


def two_tones(folder: Path) -> Take:
    return taken(folder, "oxxxxx-over.wav", note(392.0, 0.9), note(790.0, 0.8))


def half_a_second_on_the_second_channel(folder: Path) -> Take:
    return taken(folder, "short.wav", note(620.0, 0.5), channels=2)


def breath_only(folder: Path) -> Take:
    return taken(folder, "xhxxxx.wav", 0.05 * np.random.default_rng(6).standard_normal(RATE_HZ))


def five_tones(folder: Path) -> Take:
    return taken(folder, "all.wav", *(note(hz, 0.45) for hz in (392.0, 440.0, 494.0, 523.0, 587.0)))


def strange_words(folder: Path) -> Take:
    """Return a take whose name, reasons and cautions are long and hostile to a typesetter."""
    view, readings = two_tones(folder)
    hostile = "$\\frac{1}{0}$ ноты \x07 " * 12
    evidence = tuple(
        Evidence(source=f"$x_{k}$", favours=2, log_odds=k - 1.0, detail=hostile) for k in range(4)
    )
    told = []
    for reading in readings:
        bumps = tuple(
            BreathResonance(frequency_hz=100.0 * k, width_hz=30.0, prominence_db=9.0) for k in range(1, 60)
        )
        tone = replace(reading.tone, cautions=(hostile, "noisy"), breath_resonances=bumps)
        call = replace(reading.call, evidence=evidence, register=None, caution="the evidence disagrees")
        take = "takes/$\\alpha$ 鷺の笛 " + "ж" * 90 + ".wav"
        told.append(
            replace(
                reading, take=take, tone=tone, call=call, fingering=Fingering("vhoxvhoxvh"), breath="over"
            )
        )
    parts = tuple(replace(part, tone=r.tone) for part, r in zip(view.tones, told, strict=True))
    return replace(view, tones=parts), tuple(told)


def asked_twice(folder: Path) -> Take:
    """Return a take with a picture and an opinion that nobody computed."""
    view, readings = two_tones(folder)
    picture = np.random.default_rng(7).uniform(-70.0, 0.0, (120, 90))
    opinions = (
        SecondOpinion(frequency_hz=393.0, scatter_cents=10.0, share=0.98, difference_cents=4.4),
        SecondOpinion(frequency_hz=None, scatter_cents=None, share=0.0, difference_cents=None),
    )
    seconds = [
        SecondLook(
            start_s=part.tone.start_s - 0.1, end_s=part.tone.end_s + 0.1, opinion=opinion,
            picture=Picture(level_db=picture, lowest_hz=115.0, highest_hz=3700.0),
        )
        for part, opinion in zip(view.tones, opinions, strict=True)
    ]  # fmt: skip
    parts = tuple(replace(part, second=second) for part, second in zip(view.tones, seconds, strict=True))
    return replace(view, tones=parts), readings


TAKES: list[Callable[[Path], Take]] = [
    two_tones, half_a_second_on_the_second_channel, breath_only, five_tones, strange_words, asked_twice,
]  # fmt: skip


@pytest.fixture(scope="module")
def plain(tmp_path_factory: pytest.TempPathFactory) -> Take:
    return two_tones(tmp_path_factory.mktemp("plain"))


@pytest.mark.parametrize("make", TAKES)
def test_pages_are_clean(make: Callable[[Path], Take], tmp_path: Path) -> None:
    for page in take_figures(*make(tmp_path)):
        check_page(page)


def test_a_page_on_us_letter_is_clean(plain: Take) -> None:
    (page,) = take_figures(*plain, paper="letter")
    check_page(page)


def test_what_the_page_says(plain: Take, tmp_path: Path) -> None:
    view, readings = plain
    (target,) = write_take(view, readings, tmp_path / "take.pdf")
    text = pdf_text(target)
    assert "oxxxxx-over.wav" in text
    assert "2 tones" in text
    for reading in readings:
        tone = reading.tone
        words = (
            str(reading.note), f"{reading.cents:+.1f}".replace("-", "−"), f"{tone.frequency_hz:.2f} Hz",
            f"measured from {tone.start_s:.2f} to {tone.end_s:.2f} s", "partials 1 to 3",
        )  # fmt: skip
        assert [part for part in words if part not in text] == []
        for evidence in reading.call.evidence:
            assert evidence.detail in text
            assert odds_in_words(evidence) in text


def test_the_pdf_carries_its_name(plain: Take, tmp_path: Path) -> None:
    (target,) = write_take(*plain, tmp_path / "take.pdf")
    facts = PdfReader(target).metadata
    assert facts is not None
    assert facts.title == "oxxxxx-over.wav: what was heard"


def test_breath_alone_says_so(tmp_path: Path) -> None:
    (target,) = write_take(*breath_only(tmp_path), tmp_path / "take.pdf")
    text = pdf_text(target)
    for words in (
        "breath only",
        "no tones",
        "there is no register to decide",
        "Caution: no steady tone was found",
    ):
        assert words in text


def test_evidence_that_disagrees_is_a_caution(plain: Take, tmp_path: Path) -> None:
    view, readings = plain
    call = replace(readings[0].call, register=None, caution="register undecided: the evidence disagrees")
    (target,) = write_take(view, (replace(readings[0], call=call), readings[1]), tmp_path / "take.pdf")
    assert "Caution: register undecided: the evidence disagrees" in pdf_text(target)


@pytest.mark.parametrize(
    ("kind", "words"),
    [
        ("edge tone", "edge tone, register undecided"),
        ("multiphonic", "several notes at once, register undecided"),
    ],
)
def test_what_is_no_clean_tone_is_called_so(plain: Take, kind: Kind, words: str) -> None:
    view, readings = plain
    tone = replace(readings[0].tone, kind=kind)
    reading = replace(readings[0], tone=tone, call=replace(readings[0].call, register=None))
    (page,) = take_figures(replace(view, tones=(replace(view.tones[0], tone=tone),)), [reading])
    check_page(page)
    assert words in words_on(page)


def test_of_two_channels_the_page_names_the_one_that_was_used(tmp_path: Path) -> None:
    (target,) = write_take(*half_a_second_on_the_second_channel(tmp_path), tmp_path / "take.pdf")
    assert "channel 2 of 2" in pdf_text(target)


def test_more_than_three_tones_go_on(tmp_path: Path) -> None:
    view, readings = five_tones(tmp_path)
    assert len(readings) == 5
    pages = take_figures(view, readings)
    assert len(pages) == 2
    assert "page 2 of 2" in words_on(pages[1])
    assert {"A4", "D5"} <= {label for page in pages for label in words_on(page)}
    written = write_take(view, readings, tmp_path / "take.svg")
    assert [path.name for path in written] == ["take.svg", "take-2.svg"]


def test_the_second_opinion_stands_beside_ours(tmp_path: Path) -> None:
    (target,) = write_take(*asked_twice(tmp_path), tmp_path / "take.pdf")
    text = pdf_text(target)
    for words in (
        "pYIN reads 393.0 Hz, +4.4 cents from ours",
        "pYIN hears no pitch here",
        "constant-Q picture",
    ):
        assert words in text


def test_an_octave_apart_is_told_in_words(tmp_path: Path) -> None:
    view, readings = asked_twice(tmp_path)
    second = view.tones[0].second
    assert second is not None
    octave = replace(second.opinion, frequency_hz=784.0, difference_cents=1200.0)
    first = replace(view.tones[0], second=replace(second, opinion=octave))
    (target,) = write_take(replace(view, tones=(first, view.tones[1])), readings, tmp_path / "take.pdf")
    assert "pYIN reads 784.0 Hz, an octave above" in pdf_text(target)


@pytest.mark.parametrize("suffix", [".pdf", ".svg"])
def test_the_same_take_gives_the_same_bytes(tmp_path: Path, suffix: str) -> None:
    view, readings = asked_twice(tmp_path)
    one, other = (write_take(view, readings, tmp_path / f"{k}{suffix}")[0].read_bytes() for k in range(2))
    assert one == other


def test_the_readings_have_to_be_those_of_the_view(plain: Take) -> None:
    view, readings = plain
    with pytest.raises(ValueError, match="needs the readings of the tones in its view, in the same order"):
        take_figures(view, readings[::-1])


def test_an_hour_is_a_small_file(plain: Take, tmp_path: Path) -> None:
    """However long the recording, its envelope has 720 columns; 200 kB is twice what a page has."""
    (target,) = write_take(*plain, tmp_path / "take.pdf")
    assert target.stat().st_size < 200_000
    assert len(plain[0].waveform.low) <= 720


@pytest.mark.parametrize(
    ("log_odds", "words"),
    [
        (0.1, "hardly for register 2"), (0.7, "2.0 to 1 for register 2"), (2.5, "12 to 1 for register 2"),
        (300.0, "over 1000 to 1 for register 2"),
    ],
)  # fmt: skip
def test_log_odds_are_told_as_a_bet(log_odds: float, words: str) -> None:
    """By definition: natural log-odds of 2.5 are e^2.5 = 12.2 to 1."""
    assert odds_in_words(Evidence(source="", favours=2, log_odds=log_odds, detail="")) == words


@pytest.mark.parametrize(
    ("low", "high", "most", "words"),
    [
        (0.0, 2.6, 6, ["0.0", "0.5", "1.0", "1.5", "2.0", "2.5"]),
        (-80.0, 5.0, 5, ["−80", "−60", "−40", "−20", "0"]),
        (0.0, 3600.0, 9, ["0", "500", "1000", "1500", "2000", "2500", "3000", "3500"]),
        (-0.3, 0.3, 4, ["−0.2", "0.0", "0.2"]),
    ],
)
def test_ticks_are_round(low: float, high: float, most: int, words: list[str]) -> None:
    assert [word for _, word in round_ticks(low, high, most)] == words


def test_octave_ticks_and_places_on_an_axis_of_octaves() -> None:
    assert [word for _, word in octave_ticks(95.0, 1100.0)] == ["100", "200", "500", "1000"]
    panel = Panel(
        left_mm=10.0,
        top_mm=20.0,
        width_mm=30.0,
        height_mm=40.0,
        across=(100.0, 800.0),
        up=(-80.0, 0.0),
        log_x=True,
    )
    assert panel.point_mm(200.0, -20.0) == pytest.approx((20.0, 30.0))
    assert panel.point_mm(400.0, 50.0) == pytest.approx((30.0, 20.0))  # held at the upper edge


def words_on(page: Figure) -> list[str]:
    return [label.get_text() for label in labels_on(page)]
