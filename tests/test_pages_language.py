"""A file's language and title: read back with pypdf and with the standard library's XML parser.

What is read is named by ISO 32000-1:2008 (7.5.6 incremental updates, 7.7.2 catalogue) and W3C SVG 2
(5.10.2: lang; 5.4: title).
"""

from io import BytesIO
from xml.etree import ElementTree

import pytest
from matplotlib.backends.backend_pdf import PdfPages
from matplotlib.figure import Figure
from pypdf import PdfReader

from fluteprobe.pages.language import pdf_in_language, svg_in_language

SVG = "{http://www.w3.org/2000/svg}"


def pdf(pages: int) -> bytes:
    buffer = BytesIO()
    with PdfPages(buffer, metadata={"Title": "Words", "CreationDate": None}) as book:
        for k in range(pages):
            figure = Figure(figsize=(2.0, 1.0))
            figure.text(0.1, 0.5, f"page {k + 1}")
            book.savefig(figure)
    return buffer.getvalue()


@pytest.mark.parametrize("pages", [1, 3])
def test_a_pdf_says_its_language_and_keeps_everything_else(pages: int) -> None:
    before = pdf(pages)
    after = pdf_in_language(before, "en")
    assert after.startswith(before)
    reader = PdfReader(BytesIO(after), strict=True)
    assert reader.trailer["/Root"]["/Lang"] == "en"  # type: ignore[index]
    assert reader.trailer["/Root"]["/ViewerPreferences"]["/DisplayDocTitle"]  # type: ignore[index]
    assert reader.metadata is not None
    assert reader.metadata.title == "Words"
    assert [page.extract_text() for page in reader.pages] == [f"page {k + 1}" for k in range(pages)]


def test_a_reader_without_a_table_of_contents_finds_the_same() -> None:
    """The appended table is right: every offset in it is where that object begins."""
    after = pdf_in_language(pdf(1), "de-AT")
    start = int(after.rsplit(b"startxref", 1)[1].split()[0])
    _, first, count, offset, *_ = after[start:].split()
    assert (after[start:].startswith(b"xref\n"), int(count)) == (True, 1)
    assert after[int(offset) :].startswith(b"%d 0 obj" % int(first))


def test_what_is_no_pdf_is_refused() -> None:
    with pytest.raises(ValueError, match="this is no PDF file as matplotlib writes one"):
        pdf_in_language(b"%PDF-1.4\n", "en")


def test_an_svg_says_its_language_and_title() -> None:
    buffer = BytesIO()
    Figure(figsize=(1.0, 1.0)).savefig(buffer, format="svg")
    after = svg_in_language(buffer.getvalue(), "en", "Heron & <Co>")
    root = ElementTree.fromstring(after)  # noqa: S314 - our own file
    assert root.get("lang") == "en"
    assert root.get("{http://www.w3.org/XML/1998/namespace}lang") == "en"
    assert root.findtext(f"{SVG}title") == "Heron & <Co>"


def test_what_is_no_svg_is_refused() -> None:
    with pytest.raises(ValueError, match="this is no SVG file: it has no <svg> element"):
        svg_in_language(b"<html></html>", "en", "x")
