"""Cells on dask workers: local processes, or those of a cluster that runs already.

A worker is given one cell at a time, so that its death costs one cell, which the scheduler gives to another worker.
"""

from __future__ import annotations

import logging
import signal
import tempfile
import time
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from multiprocessing import resource_tracker
from typing import TYPE_CHECKING

from layout import __version__
from layout.design.many.board import Board
from layout.design.many.cells import Order
from layout.design.many.work import failed, work
from layout.errors import LayoutError

if TYPE_CHECKING:
    from distributed import Client, Future

LOOK = 0.5  # [s] between looks at the workers
ANSWER = 15.0  # [s] that a scheduler may take to answer
NO_WORKERS = 60.0  # [s] without any worker before a run stops


class ClusterError(LayoutError):
    """A dask cluster that cannot be used."""


def version_here() -> str:
    """The version that a worker runs."""
    return __version__


@contextmanager
def local_workers(count: int) -> Iterator[Client]:
    """So many processes of one thread each on this machine; they end with the context, however it is left."""
    import dask
    from distributed import Client, LocalCluster

    with tempfile.TemporaryDirectory(prefix="scalpsite-") as folder:
        with _deaf_to_ctrl_c(), dask.config.set({"distributed.comm.timeouts.connect": "30s"}):
            cluster = LocalCluster(
                n_workers=count,
                threads_per_worker=1,
                processes=True,
                dashboard_address=None,
                memory_limit=0,  # a worker over a limit would be paused or restarted, and the run never end
                silence_logs=logging.CRITICAL,
                local_directory=folder,
            )
        with cluster, Client(cluster) as client:
            yield client


@contextmanager
def _deaf_to_ctrl_c() -> Iterator[None]:
    """Ctrl-C waits till the end of this. What starts within, thread or process, never hears it: a terminal sends it to
    every process, and it is for the run, which then ends its workers.
    """
    if not hasattr(signal, "pthread_sigmask"):
        yield
        return
    resource_tracker.ensure_running()  # with the first process, it would open the ears of the thread that starts it
    before = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
    try:
        yield
    finally:
        signal.pthread_sigmask(signal.SIG_SETMASK, before)


@contextmanager
def workers_of(address: str) -> Iterator[Client]:
    """The workers of a running scheduler. Raises ClusterError where none answers or they lack this very version."""
    from distributed import Client

    logging.getLogger("distributed").setLevel(logging.CRITICAL)
    try:
        client = Client(address, timeout=ANSWER)
    except (OSError, ValueError, TypeError) as problem:
        why = type(problem).__name__ if not str(problem) else str(problem).splitlines()[0]
        raise ClusterError(
            "--scheduler: must be the address of a running dask scheduler, such as tcp://127.0.0.1:8786, but "
            f"{address!r} gave no answer ({why[:120]})"
        ) from None
    with client:
        try:
            client.wait_for_workers(1, timeout=ANSWER)
        except TimeoutError:
            raise ClusterError(
                f"--scheduler: must be a scheduler with workers, but {address!r} has none after {ANSWER:g} s"
            ) from None
        for worker, version in client.run(version_here, on_error="return").items():
            if version != __version__:
                raise ClusterError(
                    f"--scheduler: workers must have scalpsite {__version__}, but {worker} has {_said(version)}"
                )
        yield client


def _said(version: object) -> str:
    return "none" if isinstance(version, ImportError) else str(version).splitlines()[0][:120]


def run_on(client: Client, board: Board) -> None:
    """Work through the board. Cells whose workers died once too often are tried again alone, at the end.

    A cell that then again ends every worker that takes it has an error as its result. Raises ClusterError where no
    worker is left for long.
    """
    from distributed import wait

    at_work: dict[Future, tuple[Order, str]] = {}
    last: dict[str, Order] = {}
    suspects: list[Order] = []
    alone: set[str] = set()
    seen = time.monotonic()
    try:
        while True:
            workers = list(client.nthreads())
            seen = time.monotonic() if workers else seen
            if time.monotonic() - seen > NO_WORKERS:
                raise ClusterError(
                    f"--scheduler: must keep at least one worker, but there was none for {NO_WORKERS:g} s (finished "
                    "cells are kept)"
                )
            _hand_out(client, board, workers, at_work, last)
            if not at_work and suspects and workers:
                order = suspects.pop(0)
                alone.add(order.key)
                at_work[_given(client, order, workers[0])] = (order, workers[0])
            if not at_work and not suspects and board.is_empty:
                return
            board.say(len(at_work))
            if not at_work:  # no workers now
                time.sleep(LOOK)
                continue
            with suppress(TimeoutError):
                wait(list(at_work), timeout=LOOK, return_when="FIRST_COMPLETED")
            for future in [one for one in at_work if one.done()]:
                order, _ = at_work.pop(future)
                _take_in(future, order, board, suspects, alone)
    finally:
        with suppress(Exception):  # the scheduler may be gone, and there is nothing more to save
            client.cancel(list(at_work), force=True)


def _hand_out(
    client: Client,
    board: Board,
    workers: list[str],
    at_work: dict[Future, tuple[Order, str]],
    last: dict[str, Order],
) -> None:
    busy = {worker for _, worker in at_work.values()}
    for worker in workers:
        if worker in busy or len(at_work) >= len(workers):
            continue
        order = board.take(last.get(worker), [one for one, _ in at_work.values()])
        if order is None:
            return
        last[worker] = order
        at_work[_given(client, order, worker)] = (order, worker)


def _given(client: Client, order: Order, worker: str) -> Future:
    """The cell, meant for a worker that keeps its head; any other may take it if that one is gone."""
    return client.submit(work, order, workers=[worker], allow_other_workers=True, pure=False)


def _take_in(future: Future, order: Order, board: Board, suspects: list[Order], alone: set[str]) -> None:
    from distributed import KilledWorker

    if future.status not in ("finished", "error"):  # cancelled or lost on the way
        board.give_back(order)
        return
    try:
        result, seconds = future.result()
    except KilledWorker as problem:
        if order.key not in alone:  # it may only have sat beside the cell that did it
            suspects.append(order)
            return
        text = f"every worker that took this cell ended ({problem.allowed_failures + 1} of them, twice over)"
        result, seconds = failed(order, text, again=True), 0.0
    except Exception as problem:  # whatever went wrong in one cell, the others go on
        text = f"{type(problem).__name__}: {' '.join(str(problem).split())[:200]}"
        result, seconds = failed(order, f"stopped by an error of the program ({text})", again=True), 0.0
    board.done(order, result, seconds)
