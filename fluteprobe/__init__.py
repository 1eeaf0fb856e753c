"""Find out which notes a flute plays: with which fingering, how far off, and how surely.

Two calls do the work of the command line from a notebook:

>>> fluteprobe.hear("take.wav")        # the tones in one recording  # doctest: +SKIP
>>> fluteprobe.measure("my-flute")     # a session folder -> Survey  # doctest: +SKIP

Conventions everywhere: frequencies in Hz, pitch differences in cents (1/1200 octave), levels in dB with
the reference named, times in seconds from the start of the recording, temperatures in °C. `None` means
"not known", never zero.
"""

from typing import TYPE_CHECKING, Any

from fluteprobe.version import __version__

if TYPE_CHECKING:
    from fluteprobe.survey import hear, measure

__all__ = ["__version__", "hear", "measure"]


def __getattr__(name: str) -> Any:
    """Load the measuring code on first use, so that `import fluteprobe` costs nothing."""
    if name in {"hear", "measure"}:
        from fluteprobe import survey

        return getattr(survey, name)
    raise AttributeError(f"module 'fluteprobe' has no attribute {name!r}")
