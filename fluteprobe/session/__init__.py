"""The folder on disk: flute.toml, takes.csv and takes/ become a Session, and back.

Conventions: paths of takes are relative to the session folder, with forward slashes. Hidden files, folders
and what is plainly no sound (notes, pictures) are passed over. Lengths are in mm, temperatures in °C; `None`
is "not given". Nothing outside the session folder is read, links followed, and no text from a file reaches a
message with control characters in it.
"""

from fluteprobe.session.facts import FluteFacts, Sitting, facts_text
from fluteprobe.session.files import FACTS_FILE, LIST_FILE, TAKES_FOLDER
from fluteprobe.session.folder import Session, Take, create_session, read_session, require_new
from fluteprobe.session.names import parse_take_name
from fluteprobe.session.words import Problem, SessionError, printable

__all__ = [
    "FACTS_FILE",
    "LIST_FILE",
    "TAKES_FOLDER",
    "FluteFacts",
    "Problem",
    "Session",
    "SessionError",
    "Sitting",
    "Take",
    "create_session",
    "facts_text",
    "parse_take_name",
    "printable",
    "read_session",
    "require_new",
]
