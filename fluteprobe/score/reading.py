"""A tune's file is opened here: what it is tells its content, never its name.

Conventions: MusicXML plain (.musicxml, .xml) or compressed (.mxl), or a Standard MIDI File (.mid), also
wrapped in RIFF. Nothing but the file itself is opened, and no more of it read than a score can need.
"""

from pathlib import Path

from fluteprobe.files import read_whole
from fluteprobe.score import midifile, musicxml
from fluteprobe.score.tune import Score, ScoreError, Tune, tune_of

LARGEST_BYTES = musicxml.LARGEST_BYTES

_XML_STARTS = (b"<", b"\xef\xbb\xbf", b"\xff\xfe", b"\xfe\xff", b"\x00<")


def read_tune(path: Path, part: str | None = None) -> Tune:
    """Return one line of the score in a file; `part` is a part's number from 1 or its name.

    Raises
    ------
    ScoreError
        If it is no score that can be read, or has no such part; one line without the file's name.
    OSError
        If the file cannot be read or is far too large.
    """
    return tune_of(score_in(read_whole(path, LARGEST_BYTES)), part)


def score_in(content: bytes) -> Score:
    """Return the score that a file's bytes hold.

    Raises
    ------
    ScoreError
        If they hold none.
    """
    if content[:4] == b"RIFF" and content[8:12] == b"RMID":
        content = content[20:]
    if content[:4] == b"MThd":
        return midifile.read_midi(content)
    if content[:2] == b"PK":
        return musicxml.read_compressed(content)
    if content.lstrip()[:2].startswith(_XML_STARTS) or content.startswith(_XML_STARTS):
        return musicxml.read_xml(content)
    raise ScoreError("it is neither MusicXML nor a MIDI file: export the tune as one of the two")
