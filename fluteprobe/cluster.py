"""Hearing takes through joblib, and so on whatever joblib can reach: other processes, or a cluster.

Conventions: `joblib_map` is for the `map_takes` of `fluteprobe.measure`. Where the work goes is joblib's own
setting, made around the call; results come back in the order of the takes, and a take that cannot be used is
a problem of the survey as always. Every worker must see the session folder at the same absolute path.

    from dask.distributed import Client
    from joblib import parallel_config

    with Client("scheduler:8786"), parallel_config(backend="dask"):
        survey = fluteprobe.measure("/shared/heron", map_takes=joblib_map)

joblib, dask and distributed come with the extra `cluster`. On one machine the survey's own threads are
quicker: hearing a take costs less than starting a process.
"""

from collections.abc import Callable, Iterable, Sequence
from typing import TypeVar

Item = TypeVar("Item")
Result = TypeVar("Result")


def joblib_map(hear: Callable[[Item], Result], items: Sequence[Item]) -> Iterable[Result]:
    """Return each item's result, in order, as joblib is configured where this is called."""
    from joblib import Parallel, delayed

    results: Iterable[Result] = Parallel(return_as="generator")(delayed(hear)(item) for item in items)
    return results
