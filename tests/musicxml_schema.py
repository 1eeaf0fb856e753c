"""The published XML Schema of MusicXML 4.0, which the general library `musicxml` carries.

The schema refers to two others on the network. That of the xml: attributes comes with xmlschema; that of
XLink, of which a score without links uses nothing, is stood in for by its attributes' names.
"""

from functools import cache
from pathlib import Path
from tempfile import TemporaryDirectory

import musicxml
import xmlschema

_SCHEMA = Path(musicxml.__file__).parent / "generate_classes" / "musicxml_4_0.xsd"
_LINK_ATTRIBUTES = ("href", "type", "role", "title", "show", "actuate")
_XLINK = (
    '<xs:schema xmlns:xs="http://www.w3.org/2001/XMLSchema" targetNamespace="http://www.w3.org/1999/xlink">'
    + "".join(f'<xs:attribute name="{name}"/>' for name in _LINK_ATTRIBUTES)
    + "</xs:schema>"
)


def faults(content: bytes) -> list[str]:
    """Return what the schema finds wrong with a score."""
    return [str(error.reason) for error in schema().iter_errors(content.decode("utf-8"))]


@cache
def schema() -> xmlschema.XMLSchema:
    """Return the schema, read once."""
    with TemporaryDirectory() as folder:
        text = _SCHEMA.read_text("utf-8").replace("http://www.musicxml.org/xsd/xlink.xsd", "xlink.xsd")
        (Path(folder) / "musicxml.xsd").write_text(text, "utf-8")
        (Path(folder) / "xlink.xsd").write_text(_XLINK, "utf-8")
        return xmlschema.XMLSchema(str(Path(folder) / "musicxml.xsd"), allow="local")
