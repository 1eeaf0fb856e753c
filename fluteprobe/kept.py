"""What was heard in a recording is kept, so that the next run hears only what has changed.

Conventions: one small JSON file for each recording, in a folder of their own. A file's name is a digest of
the recording's bytes together with whatever decides how they are heard: this program's version, its measuring
code and the libraries that decode and transform. Nothing that has changed is therefore ever found again. A
file that is damaged, foreign or edited by hand does not match the digest it carries and counts as not there.

Keeping is never needed: where it fails, recordings are heard anew, and nothing is said.
"""

import json
import os
import re
import sys
from collections.abc import Iterable
from contextlib import suppress
from dataclasses import dataclass, field
from hashlib import sha256
from pathlib import Path
from typing import Any

from fluteprobe import fields
from fluteprobe.files import make_folder, open_ordinary, read_whole, replace_file, sweep_passing
from fluteprobe.sound.stored import tone_from
from fluteprobe.sound.tone import Tone
from fluteprobe.version import __version__

KEPT_FOLDER = ".kept"  # in the folder of the session's reports
SPARE = 100  # how many are kept of recordings that are not in the session now

_BLOCK_BYTES = 2**20
_LARGEST_BYTES = 20_000_000
_NAME = re.compile(r"[0-9a-f]{32}\.json")
_CODE = ("sound/**/*.py", "hearing.py", "kept.py", "fields.py")
_LIBRARIES = frozenset({"numpy", "soundfile", "soxr", "av"})

Stamp = tuple[int, ...]


def program_digest() -> bytes:
    """Return a digest of what decides how a recording is heard; empty where that cannot be told."""
    digest = sha256(f"{__version__} {' '.join(_libraries())}".encode())
    here = Path(__file__).parent
    try:
        code = {path.relative_to(here): path.read_bytes() for part in _CODE for path in here.glob(part)}
    except OSError:
        return b""
    for path, content in sorted(code.items()):
        digest.update(f"\n{path} {len(content)}\n".encode() + content)
    return digest.digest() if code else b""


@dataclass(frozen=True, slots=True, kw_only=True)
class Kept:
    """What was heard in recordings, on disk.

    Attributes
    ----------
    folder
        Where it is kept; made when there is something to keep.
    anew
        Find nothing, so that every recording is heard anew, and keep that.
    program
        What decides how a recording is heard.
    """

    folder: Path
    anew: bool = False
    program: bytes = field(default_factory=program_digest)

    def found(self, recordings: Iterable[Path]) -> dict[Path, tuple[Tone, ...]]:
        """Return the tones of those recordings of which something is kept."""
        there = set() if self.anew else {path.name for path in self._files()}
        heard = {}
        for recording in recordings if there else ():
            with suppress(OSError, ValueError, RecursionError):
                digest = self._digest(recording)
                if f"{digest}.json" in there:
                    heard[recording] = self._read(digest)
        return heard

    def keep(self, recording: Path, tones: Iterable[Tone], seen: Stamp | None) -> None:
        """Keep what was heard in a recording, unless it changed since `seen` or that cannot be done."""
        if not self.program or seen is None or self.folder.is_symlink():
            return
        with suppress(OSError, ValueError, TypeError):
            digest = self._digest(recording)
            if stamp(recording) == seen:
                make_folder(self.folder)
                replace_file(self.folder / f"{digest}.json", _content(digest, tones), lasting=False)

    def sweep(self, in_use: int) -> None:
        """Remove the oldest, so that as many stay as are in use and some to spare."""
        files = self._files()
        if not files:
            return
        sweep_passing(self.folder)
        if len(files) > in_use + SPARE:
            with suppress(OSError):
                for path in sorted(files, key=lambda path: path.stat().st_mtime)[: -in_use - SPARE]:
                    path.unlink(missing_ok=True)

    def _files(self) -> list[Path]:
        with suppress(OSError):
            if self.program and not self.folder.is_symlink():
                return [path for path in self.folder.iterdir() if _NAME.fullmatch(path.name)]
        return []

    def _digest(self, recording: Path) -> str:
        """Return the digest of a recording and of how it is heard, reading it block by block."""
        digest = sha256(self.program)
        with open_ordinary(recording) as file:
            while block := file.read(_BLOCK_BYTES):
                digest.update(block)
        return digest.hexdigest()[:32]

    def _read(self, digest: str) -> tuple[Tone, ...]:
        """Return the tones that are kept under a digest, and note that they were of use."""
        path = self.folder / f"{digest}.json"
        content = read_whole(path, _LARGEST_BYTES)
        head, _, body = content.partition(b"\n")
        if head != _head(digest, body):
            raise ValueError("damaged, foreign or edited")
        tones = fields.field(json.loads(content), "tones", fields.each(tone_from))
        with suppress(OSError):
            os.utime(path)
        return tones


def stamp(recording: Path) -> Stamp | None:
    """Return what tells whether a file has changed meanwhile; None where it cannot be looked at."""
    try:
        status = recording.stat()
    except OSError:
        return None
    return (status.st_mtime_ns, status.st_size, status.st_ino)


def _content(digest: str, tones: Iterable[Tone]) -> bytes:
    """Return what a file holds: floats in full, so that they come back as they were.

    Raises
    ------
    ValueError
        If a number is not finite.
    """
    values = json.dumps(list(tones), default=_fields_of, allow_nan=False, separators=(",", ":"))
    body = f'"tones": {values}}}\n'.encode()
    return _head(digest, body) + b"\n" + body


def _head(digest: str, body: bytes) -> bytes:
    """Return the first line, which holds a digest of all that follows and of the file's own name."""
    whole = sha256(digest.encode() + body).hexdigest()
    return f'{{"schema": "fluteprobe/kept/1", "digest": "{whole}",'.encode()


def _fields_of(value: Any) -> dict[str, Any]:
    return {name: getattr(value, name) for name in value.__slots__}


def _libraries() -> list[str]:
    """Return the installed libraries that matter, with their versions, without loading any."""
    names = []
    for folder in sys.path:
        with suppress(OSError):
            if folder.endswith("-packages"):
                names += [path.name for path in Path(folder).iterdir() if path.name.endswith("-info")]
    return sorted(name for name in names if name.partition("-")[0].lower() in _LIBRARIES)
