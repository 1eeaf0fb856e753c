"""takes.csv: recordings that keep their own names, as spreadsheets and people write the table."""

import os
import re
import unicodedata
from pathlib import Path

import pytest
from sessions import is_harmless, problems, put, takes

from fluteprobe.session import FluteFacts, create_session

README = (Path(__file__).parent.parent / "README.md").read_text("utf-8")
OWN_NAMES = ("New Recording 12.m4a", "Möwe.wav", "b.flac", "c.wav")


@pytest.fixture
def heron(tmp_path: Path) -> Path:
    """Return a session folder with one take by its name and four that keep their own."""
    folder = tmp_path / "heron"
    create_session(folder, FluteFacts(name="Heron", holes=6))
    put(folder, "xxxxxx.wav", *OWN_NAMES)
    return folder


def write(folder: Path, text: str, encoding: str = "utf-8") -> None:
    (folder / "takes.csv").write_bytes(text.encode(encoding))


def told(folder: Path, text: str) -> list[tuple[str, str]]:
    """Return what is told of a list, and not of names."""
    write(folder, text)
    return [(take, message) for take, message in problems(folder) if take.startswith("takes.csv")]


def used(folder: Path) -> list[tuple[str, str, str, int]]:
    """Return the takes that are not told by their names."""
    return [take for take in takes(folder) if take[0] != "takes/xxxxxx.wav"]


# --- read --------------------------------------------------------------------------------------------


def test_listed_recordings_keep_their_names_and_the_others_are_read_by_theirs(heron: Path) -> None:
    (heron / "raw").mkdir()
    (heron / "raw" / "r1.wav").write_bytes(b"r1")
    write(
        heron,
        "file,fingering,breath\nNew Recording 12.m4a,oxxxxx,over\nMöwe.wav,oxxxxx,\nraw/r1.wav,xxxxxo,soft\n"
        "takes/b.flac,oxxxxx,over\n",
    )
    assert takes(heron) == [
        ("takes/Möwe.wav", "oxxxxx", "normal", 1),
        ("takes/b.flac", "oxxxxx", "over", 1),
        ("takes/New Recording 12.m4a", "oxxxxx", "over", 2),
        ("raw/r1.wav", "xxxxxo", "soft", 1),
        ("takes/xxxxxx.wav", "xxxxxx", "normal", 1),
    ]
    assert [take for take, _ in problems(heron)] == ["takes/c.wav"]


@pytest.mark.parametrize(
    "text",
    [
        "file,fingering,breath\nb.flac,oxxxxx,over\n",
        "file;fingering;breath\nb.flac;oxxxxx;over\n",
        "file\tfingering\tbreath\nb.flac\toxxxxx\tover",
        "sep=;\nfile;fingering;breath\nb.flac;oxxxxx;over\n",
        '"file","fingering","breath"\r\n"b.flac","oxxxxx","over"\r\n',
        "File ; FINGERING ; Breath\r b.flac ; OXX XXX ; Overblown \r",
        "breath,fingering,remarks,file\nover,oxxxxx,the best one,b.flac\n",
        "\n\nfile name,fingering,breath,number\nb.flac,oxxxxx,over,1.0\n,,,\n",
        "file,fingering,breath\nB.FLAC,оххххх,over,,\n",
        "file,fingering,breath\nb,0xxxxx,over\n",
        "file,fingering,breath\n.\\takes\\b.flac,o-xx-xxx,over blown\n",
        "file,fingering,breath\n“b.flac”,“oxxxxx”,“over”\n",
    ],
)
def test_every_usual_kind_of_table_is_read(heron: Path, text: str) -> None:
    write(heron, text)
    assert used(heron) == [("takes/b.flac", "oxxxxx", "over", 1)]
    assert told(heron, text) == []


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "utf-16-le", "utf-16-be", "cp1252"])
@pytest.mark.parametrize("form", ["NFC", "NFD"])
def test_every_usual_encoding_is_read_and_every_file_system_s_spelling(
    heron: Path, encoding: str, form: str
) -> None:
    (heron / "takes" / "Möwe.wav").rename(heron / "takes" / unicodedata.normalize(form, "Möwe.wav"))  # type: ignore[arg-type]
    write(heron, "file;fingering;breath\r\nMöwe.wav;oxxxxx;soft\r\n", encoding)
    ((_, fingering, breath, number),) = used(heron)
    assert (fingering, breath, number) == ("oxxxxx", "soft", 1)


def test_a_name_that_may_be_two_files_is_told(heron: Path) -> None:
    put(heron, "b.wav")
    told_of = "column file: b may be b.flac or b.wav: write it in full"
    assert told(heron, "file,fingering\nb,oxxxxx\nB.wav,xxxxxo\n") == [("takes.csv line 2", told_of)]
    assert used(heron) == [("takes/b.wav", "xxxxxo", "normal", 1)]


def test_text_with_the_separator_in_it_stands_in_quotes(heron: Path) -> None:
    put(heron, "low, then high.wav")
    write(heron, 'file,fingering\n"low, then high.wav",oxxxxx\n')
    assert used(heron) == [("takes/low, then high.wav", "oxxxxx", "normal", 1)]


def test_numbers_that_are_given_are_kept_and_the_others_go_round_them(heron: Path) -> None:
    put(heron, "oxxxxx.wav")
    write(heron, "file,fingering,number\nb.flac,oxxxxx,\nc.wav,oxxxxx,2\nMöwe.wav,oxxxxx,\n")
    assert [(name, number) for name, _, _, number in used(heron)] == [
        ("takes/oxxxxx.wav", 1),
        ("takes/c.wav", 2),
        ("takes/b.flac", 3),
        ("takes/Möwe.wav", 4),
    ]


def test_a_list_in_capitals_is_read(heron: Path) -> None:
    (heron / "Takes.CSV").write_text("file,fingering\nb.flac,oxxxxx\n")
    assert used(heron) == [("takes/b.flac", "oxxxxx", "normal", 1)]


def test_a_name_that_says_a_fingering_itself_may_be_corrected_by_the_list(heron: Path) -> None:
    write(heron, "file,fingering\nxxxxxx.wav,oxxxxx\n")
    assert takes(heron) == [("takes/xxxxxx.wav", "oxxxxx", "normal", 1)]


# --- rows that cannot be used ------------------------------------------------------------------------


def test_all_faults_are_told_at_once_with_their_lines(heron: Path) -> None:
    rows = [
        "bb.flac,oxxx,ovr,0",
        "none.m4b,occccc,loud,1",
        ",oxxxxx,over,1",
        "b.flac,,,",
        '"c.wav,oxxxxx,over,1',
        "low, high.wav,oxxxxx,over,1",
        "Möwe.wav,xxxxxh,soft,2",
    ]
    assert told(heron, "\n".join(["file,fingering,breath,number", *rows])) == [
        ("takes.csv line 2", "column file: bb.flac is not there; did you mean b.flac?"),
        (
            "takes.csv line 2",
            "column fingering: found oxxx, expected 6 letters of x, o, h, v, top hole first, as oxxxxx",
        ),
        (
            "takes.csv line 2",
            "column breath: found ovr, expected soft, normal, over or nothing; did you mean over?",
        ),
        ("takes.csv line 2", "column number: found 0, expected a whole number from 1 to 9999, or nothing"),
        ("takes.csv line 3", "column file: none.m4b is not there: put it into takes"),
        (
            "takes.csv line 3",
            "column fingering: found occccc, expected 6 letters of x, o, h, v, top hole first, as oxxxxx; "
            "did you mean oxxxxx?",
        ),
        (
            "takes.csv line 3",
            "column breath: found loud, expected soft, normal, over or nothing; did you mean over?",
        ),
        ("takes.csv line 4", "column file: found nothing, expected the name of a recording"),
        (
            "takes.csv line 5",
            "column fingering: found nothing, expected 6 letters of x, o, h, v, top hole first, as oxxxxx",
        ),
        ("takes.csv line 6", 'found "c.wav,oxxxxx,over,1, expected a second quote'),
        (
            "takes.csv line 7",
            'found 5 cells, expected 4 as in the first line: put text with a comma in it into "quotes"',
        ),
    ]
    assert used(heron) == [("takes/Möwe.wav", "xxxxxh", "soft", 2)]
    assert "takes/b.flac" not in [take for take, _ in problems(heron)]  # told by its row already


def test_a_file_that_is_listed_twice_counts_once_and_not_at_all_where_the_rows_differ(heron: Path) -> None:
    text = "file,fingering,breath\nb.flac,oxxxxx,\nb.flac,oxxxxx,\nc.wav,oxxxxx,\nTakes/C.wav,xxxxxx,over\n"
    assert told(heron, text) == [
        ("takes.csv line 3", "takes/b.flac is listed on line 2 already: keep one of the two lines"),
        (
            "takes.csv line 5",
            "takes/c.wav is listed on line 4 already, as oxxxxx, and here as xxxxxx-over: not used; "
            "keep the line that is right",
        ),
    ]
    assert used(heron) == [("takes/b.flac", "oxxxxx", "normal", 1)]


@pytest.mark.parametrize(
    "path",
    [
        "../away.wav", "takes/../../away.wav", "..\\away.wav", "/etc/hostname", "\\\\server\\a.wav",
        "C:\\a.wav", "c:away.wav", "~/away.wav", "//server/a.wav",
    ],
)  # fmt: skip
def test_a_path_out_of_the_session_is_refused(heron: Path, tmp_path: Path, path: str) -> None:
    (tmp_path / "away.wav").write_bytes(b"away")
    assert told(heron, f"file,fingering\n{path},oxxxxx\n") == [
        (
            "takes.csv line 2",
            f"column file: {path} leads out of the session folder: put the recording into takes",
        )
    ]
    assert used(heron) == []


def test_links_out_of_the_session_are_refused_and_others_followed(heron: Path, tmp_path: Path) -> None:
    (tmp_path / "away.wav").write_bytes(b"away")
    (heron / "takes" / "away.wav").symlink_to(tmp_path / "away.wav")
    (heron / "takes" / "out").symlink_to(tmp_path)
    (heron / "takes" / "round").symlink_to("round")
    (heron / "takes" / "in.wav").symlink_to("b.flac")
    (heron / "takes" / "day").mkdir()
    rows = ["away.wav", "out/away.wav", "round", "in.wav", "day"]
    leads_out = "is a link that leads out of the session folder: put the recording itself there"
    assert told(heron, "\n".join(["file,fingering", *(f"{row},oxxxxx" for row in rows)])) == [
        ("takes.csv line 2", f"column file: away.wav {leads_out}"),
        ("takes.csv line 3", f"column file: out/away.wav {leads_out}"),
        ("takes.csv line 4", f"column file: round {leads_out}"),
        (
            "takes.csv line 6",
            "column file: day is no ordinary file: put the recording itself there",
        ),
    ]
    assert used(heron) == [("takes/in.wav", "oxxxxx", "normal", 1)]


# --- lists that cannot be used -----------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "where", "message"),
    [
        ("", "", "is empty: its first line is file,fingering,breath"),
        ("\n ;; \n", "", "is empty: its first line is file,fingering,breath"),
        (
            "b.flac,oxxxxx,over\n",
            " line 1",
            "found b.flac, oxxxxx, over, expected the columns file, fingering, breath",
        ),
        (
            "\nfil;fingring\nb.flac;oxxxxx\n",
            " line 2",
            "found fil, fingring, expected the columns file, fingering, breath; is fil meant for file?; "
            "is fingring meant for fingering?",
        ),
        ("file,file,fingering\n", " line 1", "found file, file, fingering, expected each column once"),
        ("sep=;\n", " line 2", "found nothing, expected the columns file, fingering, breath"),
        ("x" * 600_000, "", "is far too long: is it another file?"),
        ("file,fingering\n" + "b.flac,oxxxxx\n" * 3000, "", "has over 1000 lines: is it another file?"),
        ("file,fingering" + "," * 900, " line 1", "has over 100 columns: is it another file?"),
        ("\x00\x01\x02\x03", "", "is no text: save it as CSV (UTF-8)"),
        (
            "PK\x03\x04sheet",
            "",
            "is a word processor's or spreadsheet's file: save it as CSV (UTF-8)",
        ),
    ],
)
def test_a_list_that_is_none_is_told_and_takes_are_read_by_name(
    heron: Path, text: str, where: str, message: str
) -> None:
    assert told(heron, text) == [(f"takes.csv{where}", message)]
    assert takes(heron) == [("takes/xxxxxx.wav", "xxxxxx", "normal", 1)]


def test_very_many_faults_are_cut_short(heron: Path) -> None:
    lines = told(heron, "file,fingering\n" + "zzz,oxxxxx\n" * 900)
    assert lines[0] == ("takes.csv line 2", "column file: zzz is not there: put it into takes")
    assert lines[50:] == [("takes.csv", "has 850 more faults: correct these first")]


def test_a_list_that_leads_out_is_no_file_or_cannot_be_opened_is_told(heron: Path, tmp_path: Path) -> None:
    (tmp_path / "away.csv").write_text("file,fingering\nb.flac,oxxxxx\n")
    (heron / "takes.csv").symlink_to(tmp_path / "away.csv")
    assert ("takes.csv", "is a link that leads out of the folder: put the file itself there") in problems(
        heron
    )
    (heron / "takes.csv").unlink()
    (heron / "takes.csv").mkdir()
    assert ("takes.csv", "is no file that can be read") in problems(heron)
    if hasattr(os, "mkfifo"):
        (heron / "takes.csv").rmdir()
        os.mkfifo(heron / "takes.csv")
        assert ("takes.csv", "is no file that can be read") in problems(heron)
    assert takes(heron) == [("takes/xxxxxx.wav", "xxxxxx", "normal", 1)]


def test_no_control_character_of_a_list_reaches_a_message(heron: Path) -> None:
    text = "file,fingering,breath\n\x1b[2J.wav,\x1b[31m,\u202eover\n\x1b]0;x.wav,oxxxxx\n"
    lines = told(heron, text)
    assert len(lines) > 2
    assert all(is_harmless(take + message) for take, message in lines)


def test_the_readme_s_table_is_read(heron: Path) -> None:
    (shown,) = re.findall(r"^```csv\n(.*?)^```$", README, re.MULTILINE | re.DOTALL)
    (heron / "takes" / "monday").mkdir()
    put(heron, "monday/3.wav")
    (heron / "takes" / "xxxxxx.wav").unlink()
    write(heron, shown)
    assert takes(heron) == [
        ("takes/New Recording 12.m4a", "oxxxxx", "over", 1),
        ("takes/monday/3.wav", "xxxxxx", "normal", 1),
    ]
