"""What to record next, checked on invented forecasts and on the sheet that is printed from them."""

from dataclasses import replace
from pathlib import Path

from on_page import check_page, pdf_text

from fluteprobe.flute.fingering import Fingering
from fluteprobe.forecast.again import next_takes
from fluteprobe.forecast.values import Forecast, Prediction
from fluteprobe.pages.sheet import sheet_figures, write_sheet
from fluteprobe.session import FluteFacts, Session, Sitting

HERON = FluteFacts(name="Heron", holes=6)


def foretold(word: str, rank: int | None, fills: str | None, tried: int = 0, register: int = 2) -> Prediction:
    return Prediction(
        fingering=Fingering(word),
        register=register,
        frequency_hz=932.0,
        uncertainty_cents=12.4,
        note="A#5",
        cents=-7.4,
        basis="both",
        likely_to_speak=0.875,
        tried=tried,
        fills=fills,
        rank=rank,
    )


def heron(*predictions: Prediction) -> Forecast:
    return Forecast(flute=HERON, sitting=Sitting(), predictions=predictions, fit=None)


def test_new_notes_come_first_and_each_take_says_what_to_expect() -> None:
    takes = next_takes(
        heron(foretold("oxxxxo", 1, None), foretold("oxxxoo", 2, "A#5"), foretold("x" * 6, None, None))
    )
    assert [take.file_name for take in takes] == ["oxxxoo-over.wav", "oxxxxo-over.wav"]
    assert [take.group for take in takes] == ["New notes", "Other ways"]
    assert takes[0].expects == "A♯5 −7 ± 12, 88 %"


def test_a_take_that_was_tried_before_gets_the_next_number() -> None:
    (take,) = next_takes(heron(foretold("oxxxxo", 1, "A#5", tried=2)))
    assert take.file_name == "oxxxxo-over-3.wav"


def test_no_file_is_asked_for_twice() -> None:
    """A fingering may be foretold in two registers: one overblown take shows which of them speaks."""
    both = heron(foretold("oxxxxo", 1, "A#5"), foretold("oxxxxo", 2, "A#5", register=3))
    assert len(next_takes(both)) == 1


def test_the_sheet_says_what_to_expect_and_holds_to_the_page(tmp_path: Path) -> None:
    words = [f"{a}{b}{c}xx{d}" for a in "xohv" for b in "xohv" for c in "xo" for d in "xo"]
    plan = next_takes(heron(*(foretold(word, k + 1, None) for k, word in enumerate(words))))
    session = Session(folder=tmp_path, flute=replace(HERON), sitting=Sitting(), takes=())
    for page in sheet_figures(session, plan=plan):
        check_page(page)
    write_sheet(session, tmp_path / "next.pdf", plan=plan)
    text = pdf_text(tmp_path / "next.pdf")
    assert "what to try next" in text
    assert text.count("A♯5 −7 ± 12, 88 %") == len(plan) == 24
