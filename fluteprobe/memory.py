"""Memory that is freed is kept for the next take, where the C library can be told so."""

import sys

# Numbers of the parameters in glibc's <malloc.h>.
_TRIM_THRESHOLD = -1
_MMAP_THRESHOLD = -3
_TRIM_BYTES = 2**27
_MMAP_BYTES = 2**25


def keep_freed_memory() -> None:
    """Let this process keep up to 128 MB of freed memory rather than give it back to the system at once.

    Hearing a take uses the same half megabytes over and over. The system hands each out in pages of 4 kB,
    cleared, which is a fifth of all the work (measured: 1100 page faults a take of 3 s, 3.5 of 20 ms).
    Elsewhere than with glibc nothing is done: other C libraries have no such habit, or no such call.
    """
    if sys.platform != "linux":
        return
    import ctypes

    set_parameter = getattr(ctypes.CDLL(None), "mallopt", None)
    if set_parameter is not None:
        set_parameter(_MMAP_THRESHOLD, _MMAP_BYTES)
        set_parameter(_TRIM_THRESHOLD, _TRIM_BYTES)
