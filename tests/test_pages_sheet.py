"""The take sheet, checked on its file and on what the command prints. All flutes are invented.

That the directions keep a margin under full scale, two seconds of sound and a warm flute is common practice,
no source; that the ears come under local rules on noise exposure is all that is said of them.
"""

import json
import re
from dataclasses import replace
from pathlib import Path

import pytest
from click.testing import CliRunner, Result
from on_page import check_page, labels_on, pdf_text
from pypdf import PdfReader

from fluteprobe.cli.main import main
from fluteprobe.flute.fingering import Breath, Fingering
from fluteprobe.flute.plan import EDITIONS, take_plan
from fluteprobe.pages.sheet import minutes, recorded, sheet_figures, write_sheet
from fluteprobe.session import FluteFacts, Session, Sitting, Take, create_session


def session(holes: int = 6, name: str = "Heron", *takes: Take) -> Session:
    return Session(
        folder=Path("heron"), flute=FluteFacts(name=name, holes=holes, maker="Osier & Reed"),
        sitting=Sitting(date="2024-05-11", air_temperature_c=-3.5, microphone="phone, 40 cm away"),
        takes=takes,
    )  # fmt: skip


def take(states: str, breath: Breath = "normal", number: int = 1) -> Take:
    return Take(name=states, path=Path(states), fingering=Fingering(states), breath=breath, number=number)


def run(*arguments: str | Path) -> Result:
    return CliRunner().invoke(main, [str(argument) for argument in arguments])


# The page ----------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("holes", "edition", "paper"),
    [(1, "full", "a4"), (6, "short", "letter"), (6, "standard", "a4"), (10, "full", "letter")],
)
def test_nothing_overlaps_or_leaves_the_page(holes: int, edition: str, paper: str) -> None:
    for page in sheet_figures(session(holes), edition=edition, paper=paper):
        check_page(page)


def test_a_long_name_in_another_script_stays_on_the_page() -> None:
    strange = session(6, "Аист и цапля $x^2$ 鷺の笛 \x07\x1b[31m " + "ж" * 60)
    long = replace(strange.sitting, microphone="μ " * 200, date="2024-05-11 " * 12)
    for page in sheet_figures(replace(strange, sitting=long)):
        check_page(page)


@pytest.mark.parametrize(("holes", "edition"), [(1, "full"), (5, "standard"), (10, "full")])
def test_every_take_can_be_read_out_of_the_pdf_in_order(holes: int, edition: str, tmp_path: Path) -> None:
    write_sheet(session(holes), tmp_path / "sheet.pdf", edition=edition)
    names = re.findall(r"[xohv]+(?:-over|-soft)?(?:-2)?\.wav", pdf_text(tmp_path / "sheet.pdf"))
    assert names == [planned.file_name for planned in take_plan(holes, edition)]


def test_every_take_is_numbered_and_every_group_has_its_reason() -> None:
    (page,) = sheet_figures(session())
    words = [label.get_text() for label in labels_on(page)]
    text = " ".join(words)
    assert [word for word in words if word.isdigit()] == [str(k) for k in range(1, 33)]
    for planned in take_plan(6):
        assert planned.group in words
        assert planned.why in text
        assert planned.basis in text


@pytest.mark.parametrize(("edition", "holes", "pages"), [("short", 6, 1), ("standard", 6, 1), ("full", 6, 2)])
def test_how_many_pages_it_takes(edition: str, holes: int, pages: int) -> None:
    for paper in ("a4", "letter"):
        assert len(sheet_figures(session(holes), edition=edition, paper=paper)) == pages


def test_what_does_not_fit_goes_on_to_numbered_pages(tmp_path: Path) -> None:
    pages = sheet_figures(session(10))
    assert len(pages) == 2
    for number, page in enumerate(pages, start=1):
        words = [label.get_text() for label in labels_on(page)]
        assert f"page {number} of {len(pages)}" in words
        assert "Heron" in words
    written = write_sheet(session(10), tmp_path / "sheet.svg")
    assert [path.name for path in written] == ["sheet.svg", "sheet-2.svg"]


def test_what_the_sheet_says_of_recording_and_of_the_session(tmp_path: Path) -> None:
    write_sheet(session(), tmp_path / "sheet.pdf")
    text = pdf_text(tmp_path / "sheet.pdf")
    for words in (
        "arm's length", "clipped", "two seconds", "A second of silence", "temperature of the air",
        "local rules on noise exposure", "half-holed", "the mouth end is at the left", "32 takes",
        "about 25 minutes", "standard edition", "6 holes", "2024-05-11", "−3.5", "phone, 40 cm away",
    ):  # fmt: skip
        assert words in text
    facts = PdfReader(tmp_path / "sheet.pdf").metadata
    assert facts is not None
    assert (facts.title, facts.author) == ("Heron: take sheet", "Osier & Reed")


@pytest.mark.parametrize("suffix", [".pdf", ".png", ".svg"])
def test_the_same_session_gives_the_same_bytes(suffix: str, tmp_path: Path) -> None:
    contents = []
    for name in ("one", "two"):
        (path,) = write_sheet(session(), tmp_path / f"{name}{suffix}", edition="short")
        contents.append(path.read_bytes())
    assert contents[0] == contents[1]


def test_what_is_refused(tmp_path: Path) -> None:
    with pytest.raises(ValueError, match="paper is one of"):
        sheet_figures(session(), paper="a3")
    with pytest.raises(ValueError, match="an edition is one of short, standard, full, not 'long'"):
        sheet_figures(session(), edition="long")
    with pytest.raises(ValueError, match="a page is written as"):
        write_sheet(session(), tmp_path / "sheet.gif")


# What is recorded --------------------------------------------------------------------------------------


def test_a_take_is_ticked_when_its_fingering_and_breath_are_there() -> None:
    plan = take_plan(6)
    there = recorded(plan, (take("xxxxxx"), take("oxxxxx", "over", 3)))
    assert [planned.stem for planned, done in zip(plan, there, strict=True) if done] == [
        "xxxxxx",
        "oxxxxx-over",
    ]


def test_a_repeat_is_ticked_when_two_are_there() -> None:
    plan = take_plan(6)
    done = recorded(plan, (take("xxxxxx"), take("xxxxxx", "normal", 5)))
    assert [plan[k].stem for k in range(len(plan)) if done[k]] == ["xxxxxx", "xxxxxx-2"]


def test_a_ticked_box_has_a_tick_more() -> None:
    (empty,), (ticked,) = sheet_figures(session()), sheet_figures(session(6, "Heron", take("xxxxxx")))
    assert len(ticked.artists) + len(ticked.patches) == len(empty.artists) + len(empty.patches) + 1


def test_the_time_is_told_in_whole_five_minutes() -> None:
    assert [minutes(take_plan(6, edition)) for edition in EDITIONS] == [15, 25, 65]


# The command -------------------------------------------------------------------------------------------


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Return an empty current folder that holds the session `heron` with one take of five holes."""
    monkeypatch.chdir(tmp_path)
    create_session(Path("heron"), FluteFacts(name="Heron", holes=5))
    Path("heron/takes/oxxxx-over.wav").write_bytes(b"sound")
    return tmp_path


def test_the_command_prints_the_names_in_order_and_writes_the_page(here: Path) -> None:
    told = run("sheet", "heron")
    assert told.exit_code == 0, told.output
    assert re.findall(r"\S+\.wav", told.stdout) == [planned.file_name for planned in take_plan(5)]
    assert told.stdout.startswith("Heron · 5 holes · standard edition: 27 takes, 1 recorded\n\nThe ladder\n")
    assert re.findall(r"\[x\] +\d+  (\S+)", told.stdout) == ["oxxxx-over.wav"]
    assert max(len(line) for line in told.stdout.splitlines()) <= 80
    assert told.stderr == "Wrote reports/heron/sheet.pdf\n"
    assert (here / "reports/heron/sheet.pdf").is_file()


def test_the_command_s_json(here: Path) -> None:
    told = run("sheet", "heron", "--edition", "short", "--json", "--out", "out", "--format", "svg")
    values = json.loads(told.stdout)
    assert values["schema"] == "fluteprobe/sheet/1"
    assert (values["flute"], values["edition"]) == ({"name": "Heron", "holes": 5}, "short")
    assert [each["file"] for each in values["takes"]] == [p.file_name for p in take_plan(5, "short")]
    assert [each["file"] for each in values["takes"] if each["recorded"]] == ["oxxxx-over.wav"]
    assert set(values["takes"][0]) == {
        "file", "fingering", "breath", "number", "group", "why", "basis", "recorded",
    }  # fmt: skip
    assert (here / "out/sheet.svg").is_file()


def test_the_command_names_takes_that_it_cannot_read(here: Path) -> None:
    Path("heron/takes/oxxxxx.wav").write_bytes(b"sound")
    told = run("sheet", "heron")
    assert told.exit_code == 0
    assert "Not used: takes/oxxxxx.wav" in told.stderr


def test_the_command_without_a_session(here: Path) -> None:
    told = run("sheet", "heronn")
    assert told.exit_code == 1
    assert told.stderr.startswith("Error: heronn: no such folder; did you mean heron?")
