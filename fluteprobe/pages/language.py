"""The language of a finished file: what a screen reader needs to pronounce it, and matplotlib does not write.

A PDF says it in its catalogue (ISO 32000-1:2008, 7.7.2 and 14.9.2). It is added by an incremental update, as
that standard describes it (7.5.6): the file stays as it is, a new version of the catalogue and a short table
of where that stands are appended. An SVG says it in its root's attributes (W3C SVG 2, 5.10.2).

Conventions: files are bytes; language tags are those of BCP 47, such as `en`.
"""

import re

_ROOT = re.compile(rb"/Root (\d+) 0 R")
_SIZE = re.compile(rb"/Size (\d+)")
_INFO = re.compile(rb"/Info (\d+) 0 R")
_START = re.compile(rb"startxref\s+(\d+)\s+%%EOF\s*$")


def pdf_in_language(content: bytes, language: str) -> bytes:
    """Return a PDF that says its language, and whose window shows its title rather than its file's name.

    Raises
    ------
    ValueError
        If the file is not laid out as matplotlib lays it out.
    """
    start, root = _number(_START, content), _number(_ROOT, content)
    size, info = _number(_SIZE, content), _number(_INFO, content)
    old = _found(re.compile(rb"\n%d 0 obj\n<<(.*?)>>\nendobj" % root, re.DOTALL), content)
    body = content if content.endswith(b"\n") else content + b"\n"
    said = f" /Lang ({language}) /ViewerPreferences << /DisplayDocTitle true >> ".encode("ascii")
    catalogue = b"%d 0 obj\n<<%s%s>>\nendobj\n" % (root, old, said)
    table = b"xref\n%d 1\n%010d 00000 n \n" % (root, len(body))
    trailer = b"trailer\n<< /Size %d /Root %d 0 R /Info %d 0 R /Prev %d >>\n" % (size, root, info, start)
    end = b"startxref\n%d\n%%%%EOF\n" % (len(body) + len(catalogue))
    return body + catalogue + table + trailer + end


def svg_in_language(content: bytes, language: str, title: str) -> bytes:
    """Return an SVG that says its language and its title.

    Raises
    ------
    ValueError
        If there is no `<svg …>` in it.
    """
    opening = re.search(rb"<svg [^>]*>", content)
    if opening is None:
        raise ValueError("this is no SVG file: it has no <svg> element")
    start, end = opening.span()
    said = f'<svg lang="{language}" xml:lang="{language}" '.encode("ascii") + content[start + 5 : end]
    return content[:start] + said + f"\n <title>{_escaped(title)}</title>".encode() + content[end:]


def _number(pattern: re.Pattern[bytes], content: bytes) -> int:
    return int(_found(pattern, content))


def _found(pattern: re.Pattern[bytes], content: bytes) -> bytes:
    found = pattern.findall(content)
    if not found:
        raise ValueError("this is no PDF file as matplotlib writes one")
    last: bytes = found[-1]
    return last


def _escaped(words: str) -> str:
    return words.replace("&", "&amp;").replace("<", "&lt;").replace(">", "&gt;")
