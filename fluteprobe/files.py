"""Files on disk: written as a whole or not at all, read within bounds.

Conventions: a file is first written beside its place under a passing name, `.NAME.XXXXXXXX.fluteprobe.tmp`,
then put into its place in one step, so that whoever looks sees the old file or the new one, also where the
program was ended in between. What then stays behind is swept away by a later run. A passing file is locked
as long as somebody writes it, so that two runs at once do not sweep each other's.

An OSError from here carries the name of the file that was asked for, and says in plain words what to do.
"""

import errno
import os
import re
import secrets
import stat
import time
from collections.abc import Iterable, Iterator, Mapping
from contextlib import ExitStack, contextmanager, suppress
from pathlib import Path
from typing import BinaryIO

try:
    import fcntl
except ImportError:  # Windows has none; there a file that is open cannot be swept away
    fcntl = None  # type: ignore[assignment]

_PASSING = re.compile(r"\..+\.[0-9a-f]{8}\.fluteprobe\.tmp")
_ABANDONED_S = 86_400.0  # where files cannot be locked, a passing file is nobody's after a day
_PLAIN = {
    errno.ENOSPC: "the disk is full: make room, then run it again",
    errno.EDQUOT: "your share of the disk is full: make room, then run it again",
    errno.EFBIG: "files may not grow so large here: choose another folder",
    errno.EROFS: "the disk is read-only: choose another folder",
    errno.EACCES: "there is no permission to write: choose another folder",
    errno.EPERM: "there is no permission to write: choose another folder",
    errno.EEXIST: "a file is in the way: choose another folder",
    errno.EISDIR: "a folder of that name is in the way: choose another folder",
    errno.ENOTDIR: "a part of its path is a file: choose another folder",
    errno.ENOENT: "its folder is gone: was a drive removed?",
    errno.EIO: "the drive does not answer: was it removed?",
    errno.ENAMETOOLONG: "the name is too long: choose a shorter one",
}


def make_folder(folder: Path) -> None:
    """Make a folder and those above it, unless it is there.

    Raises
    ------
    OSError
        If that cannot be done; it names the folder and says what to do.
    """
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise _told(error, folder) from error


def replace_file(path: Path, content: bytes, *, lasting: bool = True) -> None:
    """Write one file as a whole: see `replace_files`."""
    replace_files({path: content}, lasting=lasting)


def replace_files(contents: Mapping[Path, bytes], *, lasting: bool = True) -> None:
    """Write files as wholes; none is put into its place before all of them are written.

    Parameters
    ----------
    lasting
        Wait until the disk holds them, so that they outlast a power cut too.

    Raises
    ------
    OSError
        If one cannot be written: it names that file; what was there before is then untouched.
    """
    with ExitStack() as held:
        written = [
            (held.enter_context(_written(path, content, lasting)), path) for path, content in contents.items()
        ]
        for passing, path in written:
            try:
                passing.replace(path)
            except OSError as error:
                raise _told(error, path) from error


def add_files(contents: Iterable[tuple[Path, bytes]], *, lasting: bool = True) -> None:
    """Write new files as wholes, over no other; all of them are put into their places, or none is.

    The contents are asked for one after the other, so that one at a time is in memory.

    Raises
    ------
    OSError
        If one cannot be written or is there already: it names that file.
    """
    with ExitStack() as held, ExitStack() as undone:
        written = [(held.enter_context(_written(path, content, lasting)), path) for path, content in contents]
        for passing, path in written:
            try:
                _put_beside(passing, path)
            except OSError as error:
                raise _told(error, path) from error
            undone.callback(path.unlink, missing_ok=True)
        undone.pop_all()


def sweep_passing(folder: Path) -> None:
    """Remove what runs that were ended while they wrote have left in a folder; what cannot be is left."""
    with suppress(OSError):
        for path in folder.iterdir():
            if _PASSING.fullmatch(path.name):
                _sweep(path)


def open_ordinary(path: Path) -> BinaryIO:
    """Open a file for reading, unbuffered; what is no ordinary file (a pipe, a device) is not waited for.

    Raises
    ------
    OSError
        If it cannot be opened or is no ordinary file.
    """
    flags = os.O_RDONLY | getattr(os, "O_BINARY", 0) | getattr(os, "O_NONBLOCK", 0)
    file = os.fdopen(os.open(path, flags), "rb", buffering=0)
    if stat.S_ISREG(os.fstat(file.fileno()).st_mode):
        return file
    file.close()
    raise OSError(errno.EINVAL, "it is no ordinary file", str(path))


def read_whole(path: Path, most_bytes: int) -> bytes:
    """Return what a file holds.

    Raises
    ------
    OSError
        If it cannot be read, is no ordinary file or holds more than `most_bytes`.
    """
    with open_ordinary(path) as file:
        if os.fstat(file.fileno()).st_size <= most_bytes:
            return file.read()
    raise OSError(errno.EFBIG, f"it is far too large (over {most_bytes // 10**6} MB)", str(path))


# --- passing files -----------------------------------------------------------------------------------


@contextmanager
def _written(path: Path, content: bytes, lasting: bool) -> Iterator[Path]:
    """Give the name of a passing file with that content; it is locked meanwhile, and gone afterwards."""
    try:
        passing, file = _opened(path)
    except OSError as error:
        raise _told(error, path) from error
    try:
        with file:
            _write(file, content, path, lasting)
            del content  # not to be held until all files are in their places
            if fcntl is None:
                file.close()  # only closed files can be moved there
            yield passing
    finally:
        with suppress(OSError):
            passing.unlink(missing_ok=True)


def _put_beside(passing: Path, path: Path) -> None:
    """Give a passing file its own name, unless another file has it."""
    try:
        os.link(passing, path)
    except FileExistsError:
        raise
    except OSError:  # memory cards know no second name for a file
        if os.path.lexists(path):
            raise FileExistsError(errno.EEXIST, "a file is in the way", str(path)) from None
        passing.rename(path)


def _opened(path: Path) -> tuple[Path, BinaryIO]:
    """Open a new passing file and lock it; once more, if a sweep came between the two."""
    while True:
        passing = path.with_name(f".{path.name}.{secrets.token_hex(4)}.fluteprobe.tmp")
        file = passing.open("xb")
        with suppress(OSError):  # not every network drive can lock
            _lock(file, wait=True)
        if fcntl is None or os.fstat(file.fileno()).st_nlink:
            return passing, file
        file.close()


def _write(file: BinaryIO, content: bytes, path: Path, lasting: bool) -> None:
    try:
        file.write(content)
        file.flush()
        if lasting:
            os.fsync(file.fileno())
    except OSError as error:
        with suppress(OSError):
            file.close()  # what is still to be written fails again
        raise _told(error, path) from error


def _sweep(passing: Path) -> None:
    """Remove a passing file unless somebody is writing it."""
    with suppress(OSError), passing.open("rb") as file:
        try:
            _lock(file, wait=False)
        except BlockingIOError:
            return
        except OSError:
            if time.time() - passing.stat().st_mtime < _ABANDONED_S:
                return
        if fcntl is None:
            file.close()
        passing.unlink(missing_ok=True)


def _lock(file: BinaryIO, *, wait: bool) -> None:
    """Lock an open file until it is closed or the program ends, however it ends.

    Raises
    ------
    BlockingIOError
        If another has locked it, and `wait` is false.
    OSError
        If files cannot be locked here.
    """
    if fcntl is None:
        raise OSError(errno.ENOTSUP, "files cannot be locked here")
    fcntl.flock(file, fcntl.LOCK_EX if wait else fcntl.LOCK_EX | fcntl.LOCK_NB)


def _told(error: OSError, path: Path) -> OSError:
    """Return an error with the name of the file that was asked for, and what to do."""
    number = error.errno or 0
    return OSError(number, _PLAIN.get(number) or error.strerror or str(error), str(path))
