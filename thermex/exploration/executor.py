"""Where points are computed: in this process, in local worker processes, or on a cluster.

Every executor has the shape of ``concurrent.futures.Executor``: ``submit(function, argument)``.
"""

from __future__ import annotations

import os
from collections.abc import Iterator
from concurrent.futures import Executor, Future, ProcessPoolExecutor
from contextlib import contextmanager
from multiprocessing import get_context
from typing import Any

from thermex.errors import InputError

#: Compute threads of one worker: parallel over points, not inside them.
ONE_THREAD = {
    "OMP_NUM_THREADS": "1",
    "OPENBLAS_NUM_THREADS": "1",
    "MKL_NUM_THREADS": "1",
    "RAYON_NUM_THREADS": "1",
}


class InProcess(Executor):
    """Computes at once, in this process."""

    def submit(self, fn: Any, /, *args: Any, **kwargs: Any) -> Future[Any]:
        """Compute now and return a finished future."""
        future: Future[Any] = Future()
        try:
            future.set_result(fn(*args, **kwargs))
        except Exception as error:
            future.set_exception(error)
        return future


@contextmanager
def local_workers(count: int) -> Iterator[Executor]:
    """Start worker processes, one compute thread each.

    They are spawned, never forked: a pool forked after a compute kernel has run can hang for ever.
    """
    before = {name: os.environ.get(name) for name in ONE_THREAD}
    os.environ.update(ONE_THREAD)
    pool = ProcessPoolExecutor(max_workers=count, mp_context=get_context("spawn"))
    try:
        yield pool
    finally:
        pool.shutdown(wait=True, cancel_futures=True)
        for name, value in before.items():
            if value is None:
                os.environ.pop(name, None)
            else:
                os.environ[name] = value


@contextmanager
def cluster(address: str) -> Iterator[Executor]:
    """Connect to a running Dask scheduler (optional extra ``cluster``).

    Raises
    ------
    InputError
        Dask is not installed, or nothing answers at the address.
    """
    try:
        from distributed import Client
    except ImportError:
        raise InputError(
            "the cluster engine is not installed", where="--scheduler", fix="pip install 'thermex[cluster]'"
        ) from None
    try:
        client = Client(address, timeout="10s")
    except Exception as error:
        raise InputError(f"no scheduler answers ({type(error).__name__})", where=f"--scheduler {address}") from None
    try:
        yield client.get_executor(pure=False)
    finally:
        client.close()
