"""Hearing takes through joblib: in this process, in others, and on a local dask cluster.

Truth is what the survey's own threads give: the same tones, in the same order, with the same problems.
"""

import shutil
from collections.abc import Callable, Iterable, Iterator, Sequence
from pathlib import Path

import pytest

import fluteprobe
from fluteprobe.cluster import joblib_map
from fluteprobe.survey import Survey

joblib = pytest.importorskip("joblib", reason="the extra `cluster` is not installed")

DEMO = Path(__file__).parent.parent / "samples" / "heron"
TAKES = ("xxxxxx", "xxxxxo", "xxxxoo", "xxxooo", "xxoooo")


@pytest.fixture(scope="module")
def session(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return a session folder with five of the demo flute's takes and one that is no recording."""
    folder = tmp_path_factory.mktemp("cluster") / "heron"
    (folder / "takes").mkdir(parents=True)
    shutil.copy(DEMO / "flute.toml", folder)
    for take in TAKES:
        shutil.copy(DEMO / "takes" / f"{take}.flac", folder / "takes")
    (folder / "takes" / "xooooo.flac").write_bytes(b"no recording")
    return folder


@pytest.fixture(scope="module")
def expected(session: Path) -> Survey:
    """Return what the survey's own threads give."""
    return fluteprobe.measure(session)


def same(survey: Survey, expected: Survey) -> bool:
    """Whether two surveys agree: words exactly, frequencies to a millionth of a cent.

    joblib gives its workers fewer threads for matrix products, which then add up in another order.
    """
    words = [
        [(r.take, str(r.fingering), r.tone.kind, r.note, r.call.register) for r in each.readings]
        for each in (survey, expected)
    ]
    pitches = [[entry.frequency_hz for entry in each.entries] for each in (survey, expected)]
    return (
        words[0] == words[1]
        and survey.problems == expected.problems
        and pitches[0] == pytest.approx(pitches[1], rel=1e-9)
    )


@pytest.mark.parametrize("backend", ["sequential", "threading", "loky"])
def test_a_backend_of_joblib_gives_the_same_survey(session: Path, expected: Survey, backend: str) -> None:
    with joblib.parallel_config(backend=backend, n_jobs=2):
        assert same(fluteprobe.measure(session, map_takes=joblib_map), expected)


def test_a_local_dask_cluster_gives_the_same_survey(session: Path, expected: Survey) -> None:
    distributed = pytest.importorskip("distributed", reason="the extra `cluster` is not installed")
    done: list[int] = []
    with (
        distributed.LocalCluster(
            n_workers=2, threads_per_worker=1, dashboard_address=None, host="127.0.0.1"
        ) as cluster,
        distributed.Client(cluster),
        joblib.parallel_config(backend="dask"),
    ):
        survey = fluteprobe.measure(
            session, on_take=lambda count, _: done.append(count), map_takes=joblib_map
        )
        seen = cluster.scheduler.transition_counter
    assert same(survey, expected)
    assert done == [1, 2, 3, 4, 5, 6]
    assert seen > 0  # the scheduler had tasks to move: they were heard there, not here


def test_takes_keep_their_order_and_one_that_fails_is_a_problem(session: Path, expected: Survey) -> None:
    """Heard in reverse and handed back in order, as any map must: the survey does not look at who did it."""
    order: list[str] = []

    def backwards(hear: Callable[..., object], takes: Sequence[object]) -> Iterator[object]:
        heard = [hear(take) for take in reversed(takes)]
        order.extend(str(take) for take in takes)
        return iter(heard[::-1])

    assert same(fluteprobe.measure(session, map_takes=backwards), expected)  # type: ignore[arg-type]
    assert len(order) == 6
    assert [problem.take for problem in expected.problems] == ["takes/xooooo.flac"]


def test_a_map_that_loses_a_take_is_no_silent_loss(session: Path) -> None:
    def lossy(hear: Callable[..., object], takes: Sequence[object]) -> Iterable[object]:
        return [hear(take) for take in takes[1:]]

    with pytest.raises(ValueError, match="shorter"):
        fluteprobe.measure(session, map_takes=lossy)  # type: ignore[arg-type]
