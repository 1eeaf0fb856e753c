"""Files of a session folder, found by what people write of them: `New Recording 12`, `raw/Take 3.WAV`.

Conventions: a path is looked for in takes/ first and then in the session folder; upper and lower case, and
composed and decomposed letters, are the same; an ending may be left out. Nothing outside the session folder
is looked at.
"""

import os
import re
from collections.abc import Iterable, Sequence
from difflib import get_close_matches
from pathlib import Path, PurePosixPath

from fluteprobe.session.files import TAKES_FOLDER, UnfitFileError, is_inside
from fluteprobe.session.names import UnfitNameError, same_name, split_ending
from fluteprobe.session.words import UNSAFE, shown

_MOST_GUESSES, _MOST_COMPARED, _LONGEST_PATH = 50, 1000, 500
_DRIVE = re.compile(r"[A-Za-z]:|[/\\]|~[/\\]")


class Finder:
    """Finds files of a session folder by what people write, never outside it; remembers what folders hold."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self._names: dict[PurePosixPath, _Names] = {}
        self._inside: dict[PurePosixPath, bool] = {}
        self._misses = 0

    def find(self, text: str) -> PurePosixPath:
        """Return a file's path in the session folder.

        Raises
        ------
        UnfitNameError, UnfitFileError
            If nothing is written, what is leads out of the folder, or there is no such file or several.
        """
        parts = [part for part in text.replace("\\", "/").split("/") if part not in {"", "."}]
        if not parts:
            raise UnfitNameError("the name of a recording")
        if UNSAFE.search(text) or len(text) > _LONGEST_PATH:
            raise UnfitFileError("is no name that a recording can have")
        if _DRIVE.match(text) or ".." in parts:
            raise UnfitFileError(f"leads out of the session folder: put the recording into {TAKES_FOLDER}")
        walked = (self._walk(base, parts) for base in (PurePosixPath(TAKES_FOLDER), PurePosixPath()))
        found = [path for path in walked if path is not None]
        if not found:
            raise UnfitFileError(f"is not there{self._nearest(parts[-1])}")
        return next((path for path in found if self._is_inside(path)), found[0])

    def _walk(self, base: PurePosixPath, parts: Sequence[str]) -> PurePosixPath | None:
        """Follow the parts of a path from a folder; stop where it leads out, None where it leads nowhere.

        Raises
        ------
        UnfitFileError
            If it may be one of several.
        """
        here = base
        for depth, part in enumerate(parts, start=1):
            if not self._is_inside(here):
                return here
            same = self._in(here).called(part, without_ending=depth == len(parts))
            if len(same) > 1:
                raise UnfitFileError(f"may be {' or '.join(map(shown, sorted(same)[:2]))}: write it in full")
            if not same:
                return None
            here /= same[0]
        return here

    def _is_inside(self, path: PurePosixPath) -> bool:
        if path not in self._inside:
            self._inside[path] = is_inside(self.folder / path, self.folder)
        return self._inside[path]

    def _in(self, folder: PurePosixPath) -> "_Names":
        """Return the names in a folder of the session, none where it is no folder."""
        if folder not in self._names:
            try:
                self._names[folder] = _Names(os.listdir(self.folder / folder))  # noqa: PTH208
            except OSError:
                self._names[folder] = _Names(())
        return self._names[folder]

    def _nearest(self, name: str) -> str:
        """Return a guess at the file that was meant; none any more where very many are not there."""
        self._misses += 1
        if self._misses > _MOST_GUESSES:
            return ""
        there = sorted(self._in(PurePosixPath(TAKES_FOLDER)).all)[:_MOST_COMPARED]
        near = get_close_matches(name, there, n=1)
        return f"; did you mean {shown(near[0])}?" if near else f": put it into {TAKES_FOLDER}"


class _Names:
    """The names in one folder, found again whatever their case and spelling."""

    def __init__(self, names: Iterable[str]) -> None:
        self.all = frozenset(names)
        self._alike: dict[str, list[str]] = {}
        self._stems: dict[str, list[str]] = {}
        for name in self.all:
            self._alike.setdefault(same_name(name), []).append(name)
            self._stems.setdefault(same_name(split_ending(name)[0]), []).append(name)

    def called(self, text: str, *, without_ending: bool) -> list[str]:
        """Return the name that is written exactly so, else those alike, else those with that stem."""
        if text in self.all:
            return [text]
        alike = self._alike.get(same_name(text), [])
        return alike or (self._stems.get(same_name(text), []) if without_ending else [])
