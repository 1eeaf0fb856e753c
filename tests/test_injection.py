"""Text from files stays text: on the screen, in the table, in drawings and on the web page.

Real commands run on a session whose facts are hostile, and on a plain twin of it. Structure is judged by
Python's own readers of CSV, XML and HTML: a drawing or page of the hostile flute has no kind of element, no
attribute and no address that its twin has not. What a spreadsheet takes for a formula: common practice, no
source.
"""

import csv
import io
import json
import re
import shutil
import xml.etree.ElementTree as ET
from collections.abc import Iterator
from dataclasses import asdict, replace
from html.parser import HTMLParser
from pathlib import Path

import pytest
from click.testing import CliRunner, Result
from pypdf import PdfReader
from surveys import heron

from fluteprobe.cli.main import main
from fluteprobe.reread import read_results
from fluteprobe.results import CSV_FIELDS, survey_csv

HERON = Path(__file__).parent.parent / "samples" / "heron" / "takes"
TAKES = ("xxxxxx", "oxxxxx-over")
HOSTILE = {
    "name": '</script><svg onload=alert(1)>]]><script>alert(1)</script>;=HYPERLINK("http://x.example";"a")',
    "maker": "=cmd|'/C calc'!A0",
    "serial": "'><img src=x onerror=alert(1)>",
    "key": "+1+1",
    "wood": "<!--<style>*{display:none}</style>--><a href=javascript:alert(1)>",
    "player": "@SUM(1)&lt;script&gt;&#60;b&#62;",
    "place": "-2+3</title></style></text></svg><iframe src=//x.example>",
    "microphone": "{{7*7}} ${x} %n %s $x^2$ \\frac{1}{0} \\input{/etc/passwd}",
}
SPEAKING = {"href", "src", "xlink:href", "action", "data", "{http://www.w3.org/1999/xlink}href"}
FORMULA = re.compile(r"""(^|[;,|\t])[\s"]*[=+\-@]""")


@pytest.fixture(scope="module")
def hostile(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Result]:
    return drawn(tmp_path_factory.mktemp("hostile"), HOSTILE, "svg,html,pdf", "--pages")


@pytest.fixture(scope="module")
def plain(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Result]:
    return drawn(tmp_path_factory.mktemp("plain"), {key: f"a plain {key}" for key in HOSTILE}, "svg,html")


def drawn(folder: Path, words: dict[str, str], formats: str, *options: str) -> tuple[Path, Result]:
    """Make a session with those words in flute.toml and draw it; return where, and what was printed."""
    takes = folder / "flute" / "takes"
    takes.mkdir(parents=True)
    for name in TAKES:
        shutil.copy(HERON / f"{name}.flac", takes)
    facts = [f"{key} = {json.dumps(words[key])}" for key in ("name", "maker", "serial", "key", "wood")]
    sitting = [f"{key} = {json.dumps(words[key])}" for key in ("player", "place", "microphone")]
    text = "\n".join(["[flute]", "holes = 6", *facts, "[session]", *sitting])
    (takes.parent / "flute.toml").write_text(text, "utf-8")
    session, out = str(takes.parent), str(folder / "out")
    told = CliRunner().invoke(main, ["measure", session, "--out", out, *options])
    for command in (["chart", "--format", formats], ["sheet", "--format", "svg"]):
        more = CliRunner().invoke(main, [*command, session, "--out", out])
        assert more.exit_code == 0, more.output
    return folder / "out", told


def svg_elements(path: Path) -> Iterator[tuple[str, dict[str, str]]]:
    for element in ET.parse(path).iter():  # noqa: S314  (a file made here)
        yield element.tag, dict(element.attrib)


class Elements(HTMLParser):
    """The elements of a page with their attributes, and all its text."""

    def __init__(self, page: str) -> None:
        super().__init__(convert_charrefs=True)
        self.found: list[tuple[str, dict[str, str]]] = []
        self.text = ""
        self.feed(page)
        self.close()

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        """Note an element."""
        self.found.append((tag, {key: value or "" for key, value in attrs}))

    def handle_data(self, data: str) -> None:
        """Note a text."""
        self.text += data


def kinds(elements: list[tuple[str, dict[str, str]]]) -> set[tuple[str, str]]:
    """Return every kind of element with every attribute that it has."""
    return {(tag, key) for tag, attributes in elements for key in ("", *attributes)}


def addresses(elements: list[tuple[str, dict[str, str]]]) -> set[str]:
    """Return where elements lead to, sounds and glyphs within the file by their kind only."""
    found = {value for _, attributes in elements for key, value in attributes.items() if key in SPEAKING}
    return {re.sub(r"^(#|data:audio/|data:image/).*", r"\1", address, flags=re.DOTALL) for address in found}


@pytest.mark.parametrize("name", ["chart.svg", "map.svg", "sheet.svg"])
def test_a_drawing_has_no_element_attribute_or_address_that_its_twin_has_not(
    hostile: tuple[Path, Result], plain: tuple[Path, Result], name: str
) -> None:
    bad, good = (list(svg_elements(folder / name)) for folder, _ in (hostile, plain))
    assert kinds(bad) <= kinds(good)
    assert addresses(bad) <= addresses(good)
    assert "script" not in {tag.rpartition("}")[2] for tag, _ in bad}


def test_the_web_page_has_no_element_attribute_or_address_that_its_twin_has_not(
    hostile: tuple[Path, Result], plain: tuple[Path, Result]
) -> None:
    bad, good = (Elements((folder / "chart.html").read_text("utf-8")) for folder, _ in (hostile, plain))
    assert kinds(bad.found) <= kinds(good.found)
    assert addresses(bad.found) <= addresses(good.found)
    assert HOSTILE["name"] in bad.text  # whole, as text
    assert HOSTILE["maker"] in bad.text


@pytest.mark.parametrize("name", ["chart.pdf", "map.pdf", "takes/oxxxxx-over.pdf"])
def test_a_pdf_opens_and_does_nothing_by_itself(hostile: tuple[Path, Result], name: str) -> None:
    content = (hostile[0] / name).read_bytes()
    reader = PdfReader(hostile[0] / name)
    assert len(reader.pages) >= 1
    assert not {"/OpenAction", "/AA", "/Names", "/AcroForm"} & set(reader.root_object)
    assert not re.search(rb"/(JavaScript|JS|Launch|URI|EmbeddedFile)\b", content)


def test_no_cell_of_the_table_is_a_formula_and_numbers_are_numbers(hostile: tuple[Path, Result]) -> None:
    with (hostile[0] / "measurements.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    assert rows
    for row in rows:
        assert tuple(row) == CSV_FIELDS
        for field, cell in row.items():
            if field in {"flute", "fingering", "note", "takes"}:
                assert not FORMULA.search(cell), cell
            else:
                assert cell == "" or float(cell) == float(cell)
        assert row["flute"].replace("'", "") == HOSTILE["name"].replace("'", "")


@pytest.mark.parametrize("separator", ",;|\t")
@pytest.mark.parametrize(
    "start", ["=1+1", "+1", "-1", "@SUM(1)", "  =1", '"=1"', "＝1", "\t=1", "\r=1", "\n=1"]
)
def test_no_cell_is_a_formula_whichever_separator_the_spreadsheet_splits_at(
    separator: str, start: str
) -> None:
    survey = heron()
    for name in (start, f"A{separator}{start}", f"A{separator} {start}{separator}{start}"):
        named = replace(
            survey,
            flute=replace(survey.flute, name=name),
            entries=tuple(replace(entry, takes=(name, name)) for entry in survey.entries),
        )
        header, *lines = survey_csv(named).splitlines()
        assert header == ",".join(CSV_FIELDS)
        assert len(lines) == len(survey.entries)
        for line in lines:
            cells = [cell.strip(' "') for cell in line.split(separator)]
            text = [cell for cell in cells if not re.fullmatch(r"-?[0-9.]+(e-?[0-9]+)?", cell)]
            assert not [cell for cell in text if cell.startswith(("=", "+", "-", "@", "＝"))], line


def test_numbers_below_zero_stay_numbers() -> None:
    rows = list(csv.DictReader(io.StringIO(survey_csv(heron()))))
    assert rows[0]["cents"] == "-3.2"


@pytest.mark.parametrize("command", ["measure", "hear"])
def test_no_text_of_a_file_s_name_controls_the_terminal(tmp_path: Path, command: str) -> None:
    takes = tmp_path / "a\x1b[2J" / "takes"
    takes.mkdir(parents=True)
    (takes.parent / "flute.toml").write_text("[flute]\nholes = 6\n", "utf-8")
    for name in ("oxxxxx\x1b]0;title\x07.wav", "xxxxxx\u202e.wav", "oooooo\x9b31m.wav", "a\nNot used: b.wav"):
        (takes / name).write_bytes(b"no recording")
    words = [str(takes.parent)] if command == "measure" else [str(path) for path in takes.iterdir()]
    told = CliRunner().invoke(
        main, [command, *words, *(["--out", str(tmp_path)] if command == "measure" else [])]
    )
    assert told.exit_code == 1
    assert not re.search(r"[\x00-\x09\x0b-\x1f\x7f-\x9f\u202e]", told.output)
    assert sum(line.startswith("Not used: ") for line in told.output.splitlines()) == 4


def test_measurements_of_a_hostile_flute_come_back_as_they_were(hostile: tuple[Path, Result]) -> None:
    survey = read_results(hostile[0] / "measurements.json")
    found = {**asdict(survey.flute), **asdict(survey.sitting)}
    assert {key: found[key] for key in HOSTILE} == HOSTILE
    assert not re.search(r"[\x00-\x09\x0b-\x1f\x7f-\x9f]", hostile[1].output)
