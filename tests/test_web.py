"""The web page: its text and structure from the file, its behaviour in a browser where there is one.

Structure and names for those who do not see the page follow W3C WCAG 2.2 (1.1.1, 1.3.1, 2.4.6, 3.1.1, 4.1.2)
as far as a file shows it. Surveys are invented, or those of the demo flute.
"""

import io
import os
import re
import subprocess
import sys
from base64 import b64decode
from collections import Counter
from dataclasses import replace
from html.parser import HTMLParser
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import soundfile
from browser import console_of, needs_browser, print_page, site, told_by
from pypdf import PdfReader
from surveys import all_off, entry, heron, nothing_heard, one_take, reading, sixty_entries, strange_words

import fluteprobe
from fluteprobe.flute.register import RegisterCall
from fluteprobe.pages import web
from fluteprobe.pages.contents import cents_text, uncertainty_text
from fluteprobe.pages.spoken import fingering_in_words
from fluteprobe.pages.web import web_page, write_web
from fluteprobe.session import Problem, Sitting
from fluteprobe.survey import Survey

DEMO = Path(__file__).parent.parent / "samples" / "heron"
ALLOWED_TAGS = {
    "html", "head", "meta", "title", "link", "style", "body", "header", "main", "section", "footer", "div",
    "h1", "h2", "h3", "p", "ol", "ul", "li", "dl", "dt", "dd", "span", "i", "sup", "sub", "svg", "path",
    "text", "audio",
}  # fmt: skip
NEVER_CLOSED = {"meta", "link"}
FORMS_OF_EVIL = (
    "<script>alert(1)</script>", '"><img src=x onerror=alert(1)>', "</style><script>alert(1)</script>",
    "<!--", "]]>", "&lt;b&gt; &amp;", "' onmouseover='alert(1)", "</title><svg onload=alert(1)>",
    "\u202egpj.exe\x00\x1b]0;x\x07", "javascript:alert(1)", "\ud800",
)  # fmt: skip


class Outline(HTMLParser):
    """A page taken apart: its elements with their attributes, and its texts with the elements around them."""

    def __init__(self, page: str) -> None:
        super().__init__(convert_charrefs=True)
        self.elements: list[tuple[str, dict[str, str | None]]] = []
        self.texts: list[tuple[tuple[str, ...], str]] = []
        self.unclosed: list[str] = []
        self.feed(page)
        self.close()

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        """Note an element and its attributes."""
        self.elements.append((tag, dict(attrs)))
        if tag not in NEVER_CLOSED:
            self.unclosed.append(tag)

    def handle_endtag(self, tag: str) -> None:
        """Check that the element closed is the one last opened."""
        assert self.unclosed.pop() == tag

    def handle_data(self, data: str) -> None:
        """Note a text."""
        if data.strip():
            self.texts.append((tuple(self.unclosed), data.strip()))

    def all(self, tag: str) -> list[dict[str, str | None]]:
        """Return the attributes of all elements of a kind."""
        return [attributes for name, attributes in self.elements if name == tag]

    def text(self) -> str:
        """Return all text of the body."""
        return " ".join(text for around, text in self.texts if "body" in around)


@pytest.fixture(scope="module")
def demo() -> Survey:
    return fluteprobe.measure(DEMO)


@pytest.fixture(scope="module")
def demo_page(demo: Survey, tmp_path_factory: pytest.TempPathFactory) -> Path:
    target = tmp_path_factory.mktemp("web") / "chart.html"
    assert write_web(demo, DEMO, target) == (target,)
    return target


# What stands on the page -------------------------------------------------------------------------------


@pytest.mark.parametrize("make", [heron, one_take, nothing_heard, sixty_entries, strange_words])
def test_every_entry_is_on_the_page(make: Any) -> None:
    survey: Survey = make()
    page = Outline(web_page(survey, {}))
    words = page.text()
    assert page.unclosed == []
    for each in survey.entries:
        assert str(each.fingering) in words
        assert cents_text(each.cents, 10.0) in words
        assert uncertainty_text(each.uncertainty_cents) in words
    labels = Counter(attributes["aria-label"] for attributes in page.all("svg") if "aria-label" in attributes)
    assert labels == Counter(fingering_in_words(each.fingering) for each in survey.entries)


def test_registers_notes_and_fingerings_are_headings_and_lists() -> None:
    page = Outline(web_page(heron(), {}))
    told = [(around[-1], text) for around, text in page.texts if around[-1] in {"h1", "h2"}]
    assert told[:3] == [("h1", "Heron"), ("h2", "Second register"), ("h2", "First register")]
    assert len(page.all("h3")) == len({(e.register, e.note) for e in heron().entries})
    ways = [attributes for attributes in page.all("li") if attributes.get("class") == "way"]
    assert len(ways) == len(heron().entries)
    names = {attributes["id"] for attributes in page.all("h2") if "id" in attributes}
    assert {a["aria-labelledby"] for a in page.all("section") if "aria-labelledby" in a} == names


def test_what_is_drawn_is_also_said_or_adds_nothing() -> None:
    page = Outline(web_page(heron(), {}))
    for attributes in page.all("svg"):
        assert (attributes.get("aria-hidden") == "true") != bool(attributes.get("aria-label"))
    words = page.text()
    assert "17 cents flat, more than the tolerance" in words
    assert "5 cents sharp, within the tolerance" in words
    assert "C sharp 6" in words
    assert "did not speak" in words
    assert "A4 = 440 Hz" in words


def test_all_text_is_inside_a_landmark() -> None:
    page = Outline(web_page(heron(), {}))
    landmarks = {"header", "main", "footer"}
    outside = [text for around, text in page.texts if "body" in around and not landmarks & set(around)]
    assert outside == []
    assert [len(page.all(tag)) for tag in ("header", "main", "footer", "h1")] == [1, 1, 1, 1]


def test_the_page_has_a_language_a_title_and_a_width() -> None:
    page = Outline(web_page(heron(), {}))
    assert page.all("html")[0]["lang"] == "en"
    assert (("html", "head", "title"), "Heron: fingering chart") in page.texts
    assert {"name": "viewport", "content": "width=device-width, initial-scale=1"} in page.all("meta")


def test_a_wider_tolerance_calls_less_of_it_off() -> None:
    def off(tolerance_cents: float) -> int:
        page = Outline(web_page(heron(), {}, tolerance_cents=tolerance_cents))
        return sum(attributes.get("class") == "cents off" for attributes in page.all("dd"))

    assert off(10.0) == sum(abs(e.cents) > 10.0 for e in heron().entries)
    assert off(25.0) == 0
    with pytest.raises(ValueError, match="a tolerance is above 0 cents"):
        web_page(heron(), {}, tolerance_cents=0.0)


# What files say is text --------------------------------------------------------------------------------


@pytest.mark.parametrize("words", FORMS_OF_EVIL)
def test_no_text_from_a_file_becomes_markup(words: str) -> None:
    """Every text that a survey takes from files, each in turn something that a careless page would run."""
    plain = Outline(web_page(heron(), {}))
    survey = heron()
    flute = replace(survey.flute, name=words, maker=words, serial=words, key=words, wood=words)
    sitting = Sitting(date=words, player=words, place=words, microphone=words)
    silent = replace(reading("xxxxxx"), take=words, fingering=None)
    hostile = replace(
        survey,
        flute=flute,
        sitting=sitting,
        readings=(silent,),
        problems=(Problem(take=words, message=words),),
        entries=tuple(replace(e, takes=(words,)) for e in survey.entries),
    )
    page = Outline(web_page(hostile, {}))
    assert page.unclosed == []
    assert {tag for tag, _ in page.elements} <= ALLOWED_TAGS
    known = {name for _, attributes in plain.elements for name in attributes}
    assert {name for _, attributes in page.elements for name in attributes} <= known
    assert page.all("meta")[1] == plain.all("meta")[1]  # the security policy
    assert not any(ord(letter) < 32 and letter != "\n" for letter in web_page(hostile, {}))


def test_nothing_is_fetched_and_nothing_runs(demo_page: Path) -> None:
    page = Outline(demo_page.read_text("utf-8"))
    assert {tag for tag, _ in page.elements} <= ALLOWED_TAGS
    for tag, attributes in page.elements:
        for name, value in attributes.items():
            assert not name.startswith("on"), tag
            assert name != "style", tag
            assert name not in {"href", "src"} or (value or "").startswith("data:"), tag
    assert "url(" not in web._style()
    assert "@import" not in web._style()
    policy = str(page.all("meta")[1]["content"])
    assert policy.startswith("default-src 'none'; style-src 'sha256-")
    assert "unsafe" not in policy
    assert "script-src" not in policy


# Sound -------------------------------------------------------------------------------------------------


def sounds_of(page: Path) -> list[tuple[str, bytes]]:
    players = Outline(page.read_text("utf-8")).all("audio")
    head = "data:audio/mpeg;base64,"
    for player in players:
        assert (player["src"] or "").startswith(head)
    return [(str(p["aria-label"]), b64decode(str(p["src"])[len(head) :])) for p in players]


def test_every_fingering_of_the_demo_can_be_heard_at_its_pitch(demo: Survey, demo_page: Path) -> None:
    """Each clip's strongest partial is a whole multiple of its entry's frequency, within 10 cents."""
    sounds = sounds_of(demo_page)
    upper = sorted((e for e in demo.entries if e.register > 1), key=lambda e: e.register)
    assert len(sounds) == len(demo.entries)
    assert sounds[0][0].startswith("Hear ")
    assert {label.partition(", ")[2] for label, _ in sounds} == {
        fingering_in_words(e.fingering) for e in demo.entries
    }
    assert upper
    for label, content in sounds:
        samples, rate_hz = soundfile.read(io.BytesIO(content))
        spectrum = np.abs(np.fft.rfft(samples * np.hanning(len(samples)), 2**18))
        peak_hz = float(np.argmax(spectrum)) * rate_hz / 2**18
        note = label.removeprefix("Hear ").partition(",")[0].replace(" sharp ", "#")
        fingers = label.partition(", ")[2]
        (mine,) = [e for e in demo.entries if (e.note, fingering_in_words(e.fingering)) == (note, fingers)]
        order = round(peak_hz / mine.frequency_hz)
        assert abs(1200.0 * np.log2(peak_hz / (order * mine.frequency_hz))) < 10.0, label


def test_sound_can_be_left_out(demo: Survey, demo_page: Path, tmp_path: Path) -> None:
    write_web(demo, DEMO, tmp_path / "quiet.html", with_sound=False)
    write_web(demo, None, tmp_path / "alone.html")
    quiet = (tmp_path / "quiet.html").read_text("utf-8")
    assert Outline(quiet).all("audio") == []
    assert quiet == (tmp_path / "alone.html").read_text("utf-8")
    assert demo_page.stat().st_size < 2_000_000


def with_take(take: str) -> Survey:
    """Return a survey of one entry from a take by that name."""
    told = reading("xxxxx", kind="tone", frequency_hz=330.0)
    call = RegisterCall(register=1, probability={1: 1.0, 2: 0.0, 3: 0.0})
    mine = replace(entry("xxxxx", 1, 64, 0.2), takes=(take,))
    return replace(one_take(), entries=(mine,), readings=(replace(told, take=take, call=call),))


def test_only_takes_inside_the_session_are_opened(tmp_path: Path) -> None:
    """A name with .. in it, a whole path, and a link that leads out give no sound; a take inside does."""
    folder, outside = tmp_path / "session", tmp_path / "outside.wav"
    (folder / "takes").mkdir(parents=True)
    time_s = np.arange(3 * 48000) / 48000
    for path in (outside, folder / "takes" / "xxxxx.wav"):
        soundfile.write(path, 0.3 * np.sin(2 * np.pi * 330.0 * time_s), 48000)
    (folder / "takes" / "link.wav").symlink_to(outside)
    heard = {}
    for take in ("takes/xxxxx.wav", "../outside.wav", str(outside), "takes/link.wav", "takes/none.wav", "\0"):
        write_web(with_take(take), folder, tmp_path / "chart.html")
        heard[take] = len(sounds_of(tmp_path / "chart.html"))
    assert list(heard.values()) == [1, 0, 0, 0, 0, 0]


def test_a_span_beyond_a_take_that_was_cut_since_gives_no_sound(tmp_path: Path) -> None:
    (tmp_path / "takes").mkdir()
    soundfile.write(tmp_path / "takes" / "xxxxx.wav", 0.3 * np.sin(np.arange(12000) / 9.0), 48000)
    write_web(with_take("takes/xxxxx.wav"), tmp_path, tmp_path / "chart.html")
    assert sounds_of(tmp_path / "chart.html") == []


# Bytes -------------------------------------------------------------------------------------------------


def test_the_same_survey_gives_the_same_bytes_in_any_process(
    demo: Survey, demo_page: Path, tmp_path: Path
) -> None:
    """In this process and in others, in which Python orders sets anew."""
    write_web(demo, DEMO, tmp_path / "chart.html")
    assert (tmp_path / "chart.html").read_bytes() == demo_page.read_bytes()
    program = (
        "import sys, pathlib; sys.path[:0] = sys.argv[2].split(';')\n"
        "from surveys import heron; from fluteprobe.pages.web import write_web\n"
        "write_web(heron(), None, pathlib.Path(sys.argv[1]))"
    )
    here = Path(__file__).resolve().parent
    for seed in ("1", "2"):
        command = [
            sys.executable,
            "-W",
            "error",
            "-c",
            program,
            str(tmp_path / seed),
            f"{here};{here.parent}",
        ]
        subprocess.run(command, check=True, env={**os.environ, "PYTHONHASHSEED": seed})
    assert (tmp_path / "1").read_bytes() == (tmp_path / "2").read_bytes() == web_page(heron(), {}).encode()


def test_a_page_that_cannot_be_written_leaves_the_old_one(tmp_path: Path) -> None:
    with pytest.raises(FileNotFoundError):
        write_web(one_take(), None, tmp_path / "nowhere" / "chart.html")
    assert list(tmp_path.iterdir()) == []


# In a browser ------------------------------------------------------------------------------------------

PLAYS_ALL = """<!doctype html><title>listens</title><iframe src="/page" width="360" height="700"></iframe>
<script>
const frame = document.querySelector("iframe");
const tell = (what) => fetch("/told", {method: "POST", body: JSON.stringify(what)});
const heard = (audio) => new Promise((done) => {
  audio.muted = true;
  audio.addEventListener("timeupdate", () => { if (audio.currentTime > 0.1) done(audio.duration); });
  audio.addEventListener("error", () => done(-1));
  audio.play().catch((reason) => done(String(reason)));
});
frame.addEventListener("load", async () => {
  const inside = frame.contentDocument, durations = [];
  for (const audio of inside.querySelectorAll("audio")) { durations.push(await heard(audio)); audio.pause(); }
  const first = inside.querySelector("audio");
  first.focus();
  tell({
    durations, focused: inside.activeElement === first,
    across: inside.documentElement.scrollWidth, room: frame.contentWindow.innerWidth,
    fetched: frame.contentWindow.performance.getEntriesByType("resource").map((entry) => entry.name)
      .filter((name) => !name.startsWith("data:")),
    smallest: Math.min(...[...inside.querySelectorAll("p, dd, li, h3")]
      .map((node) => parseFloat(frame.contentWindow.getComputedStyle(node).fontSize))),
  });
});
</script>"""


@needs_browser
def test_it_loads_without_an_error_or_a_request_and_every_take_plays(demo: Survey, demo_page: Path) -> None:
    """In a frame as wide as a phone, by a page around it: the page itself runs no script."""
    with site({"/page": demo_page.read_text("utf-8"), "/listens": PLAYS_ALL}) as shown:
        told, console = told_by(shown, "/listens")
        asked = set(shown.asked)
    assert told is not None, console
    assert len(told["durations"]) == len(demo.entries)
    assert all(isinstance(each, float | int) and 0.2 < each < 2.2 for each in told["durations"]), told
    assert told["focused"]
    assert told["across"] <= told["room"]
    assert told["fetched"] == []
    assert told["smallest"] >= 12.0  # CSS pixels
    assert asked <= {"/listens", "/page", "/favicon.ico"}  # the last one for the page around it
    assert console == []


@needs_browser
@pytest.mark.parametrize("make", [heron, strange_words, sixty_entries, nothing_heard])
def test_other_pages_load_without_an_error_or_a_request(make: Any) -> None:
    with site({"/page": web_page(make(), {})}) as shown:
        assert console_of(f"{shown.address}/page") == []
        assert shown.asked == ["/page"]


@needs_browser
def test_the_policy_keeps_out_what_should_not_be_there() -> None:
    """The same page with a picture, a script and a style put into it: the browser refuses all three."""
    worse = web_page(one_take(), {}).replace(
        "<main", '<img src="/picture.png"><script>fetch("/told")</script><p style="color: red">x</p><main', 1
    )
    with site({"/page": worse}) as shown:
        console = console_of(f"{shown.address}/page")
        assert shown.asked == ["/page"]
    assert len([line for line in console if "Content Security Policy" in line]) == 3


@needs_browser
@pytest.mark.parametrize("size", ["letter", "A4"])
def test_the_demo_prints_on_one_page(
    size: str, demo: Survey, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    style = web._style().replace("@page {", f"@page {{ size: {size};")
    monkeypatch.setattr(web, "_style", lambda: style)
    write_web(demo, DEMO, tmp_path / "chart.html")
    print_page((tmp_path / "chart.html").as_uri(), tmp_path / "chart.pdf")
    (page,) = PdfReader(tmp_path / "chart.pdf").pages
    width_mm = float(page.mediabox.width) * 25.4 / 72.0
    assert width_mm == pytest.approx({"letter": 215.9, "A4": 210.0}[size], abs=0.5)
    words = re.sub(r"\s+", " ", page.extract_text())
    for each in demo.entries:
        assert str(each.fingering) in words
        assert cents_text(each.cents, 10.0) in words


@needs_browser
def test_a_fuller_flute_and_an_empty_one_print_on_one_page_too(tmp_path: Path) -> None:
    for survey in (heron(), one_take(), nothing_heard(), all_off(49.0)):
        write_web(survey, None, tmp_path / "chart.html")
        print_page((tmp_path / "chart.html").as_uri(), tmp_path / "chart.pdf")
        assert len(PdfReader(tmp_path / "chart.pdf").pages) == 1
