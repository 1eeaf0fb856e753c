"""Sound files harmed at random, for hypothesis: bytes changed, most of them near the ends; the end cut off.

Conventions: a change is (place, value), the place from 0 at the start to 1 at the end and from 0 at the end
to -1 at the start, so that small numbers are where headers and indexes are.
"""

from pathlib import Path

import numpy as np
from hypothesis import strategies as st

from fluteprobe.sound.recording import RecordingError, open_recording

Changes = list[tuple[float, int]]

CHANGES = st.lists(st.tuples(st.floats(-1.0, 1.0), st.integers(0, 255)), min_size=1, max_size=8)
KEPT = st.one_of(st.just(1.0), st.floats(0.01, 1.0))


def harmed(content: bytes, changes: Changes, kept: float) -> bytes:
    """Return the content with some bytes changed and the first `kept` of it left, at least a byte."""
    changed = bytearray(content)
    for place, value in changes:
        at = int(abs(place) ** 3 * (len(changed) - 1))
        changed[at if place >= 0.0 else -1 - at] = value
    return bytes(changed[: max(int(kept * len(changed)), 1)])


def is_read_or_refused_in_one_line(path: Path) -> bool:
    """Return whether a file gives at most a minute of finite samples, or else one line of reasons."""
    try:
        recording = open_recording(path)
    except RecordingError as error:
        return "\n" not in str(error)
    samples = recording.read(0, recording.frames)
    return bool(np.all(np.isfinite(samples))) and recording.duration_s <= 60.0
