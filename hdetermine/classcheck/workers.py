"""Worker processes: groups in parallel, results in order, nobody stopped by another's failure."""

from __future__ import annotations

import multiprocessing
import os
import signal
import threading
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import Future, ProcessPoolExecutor, wait
from concurrent.futures.process import BrokenProcessPool
from contextlib import contextmanager

from hdetermine.classcheck.finding import GroupFinding
from hdetermine.classcheck.groupcheck import GroupTask, check_group, unexpected
from hdetermine.files.interruption import held_signals

THREAD_VARIABLES = ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS")
Progress = Callable[[str, int, int], None]
Worker = Callable[[GroupTask], GroupFinding]


def check_groups(
    tasks: Sequence[GroupTask], jobs: int, progress: Progress, worker: Worker = check_group
) -> list[GroupFinding]:
    """Check groups in worker processes.

    Even one job runs in a process of its own, so that the number of jobs cannot change a result
    (the linear algebra has one thread there) and a process that dies takes one group with it.

    Parameters
    ----------
    tasks : sequence of GroupTask
        One a group.
    jobs : int
        Processes at once.
    progress : callable
        Called as ``progress("groups", done, total)``.
    worker : callable
        What is done with a task; it must be importable from its module.

    Returns
    -------
    list of GroupFinding
        In the order of the tasks.
    """
    findings: dict[int, GroupFinding] = {}
    remaining = list(range(len(tasks)))
    with _one_thread():
        # A dead process breaks its pool: what was under way is tried again, each alone.
        for attempt_jobs in (jobs, 1):
            remaining = _run(tasks, remaining, attempt_jobs, progress, worker, findings)
        for index in remaining:
            alone = _run(tasks, [index], 1, progress, worker, findings)
            if alone:
                findings[index] = unexpected(tasks[index].group, "its process died")
    return [findings[index] for index in range(len(tasks))]


def _run(
    tasks: Sequence[GroupTask],
    indices: Sequence[int],
    jobs: int,
    progress: Progress,
    worker: Worker,
    findings: dict[int, GroupFinding],
) -> list[int]:
    """Run some tasks; return those whose pool broke before they were done."""
    if not indices:
        return []
    pool = ProcessPoolExecutor(
        max_workers=min(jobs, len(indices)),
        mp_context=multiprocessing.get_context("spawn"),
        initializer=_start_worker,
    )
    broken: list[int] = []
    try:
        futures: dict[Future[GroupFinding], int] = {}
        for index in indices:
            try:
                with _spawning():
                    futures[pool.submit(worker, tasks[index])] = index
            except BrokenProcessPool:
                broken.append(index)
        pending = set(futures)
        while pending:
            done, pending = wait(pending, timeout=0.2)
            for future in done:
                index = futures[future]
                fault = future.exception()
                if fault is None:
                    findings[index] = future.result()
                elif isinstance(fault, BrokenProcessPool):
                    broken.append(index)
                else:
                    findings[index] = unexpected(tasks[index].group, type(fault).__name__)
            progress("groups", len(findings), len(tasks))
    except BaseException:
        _end(pool)
        raise
    pool.shutdown()
    return sorted(broken)


def _end(pool: ProcessPoolExecutor) -> None:
    """End a pool at once: what it was working on is not wanted any more."""
    processes = list((pool._processes or {}).values())  # no public way before Python 3.14
    pool.shutdown(wait=False, cancel_futures=True)
    for process in processes:
        process.terminate()
    for process in processes:
        process.join()


@contextmanager
def _spawning() -> Iterator[None]:
    """Let a process start whole, and deaf to the interrupts that a terminal sends to all.

    A process that its parent leaves in the middle of that ends with a traceback of its own.
    """
    with held_signals():
        before = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
        try:
            yield
        finally:
            signal.pthread_sigmask(signal.SIG_SETMASK, before)


def _start_worker() -> None:
    """Leave interrupts to the parent process, and do not outlive it."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    signal.signal(signal.SIGTERM, signal.SIG_DFL)
    parent = multiprocessing.parent_process()
    if parent is not None:
        threading.Thread(target=_follow, args=(parent,), daemon=True).start()


def _follow(parent: multiprocessing.process.BaseProcess) -> None:
    parent.join()
    os._exit(1)


@contextmanager
def _one_thread() -> Iterator[None]:
    """Let new processes use one thread for linear algebra."""
    before = {name: os.environ.get(name) for name in THREAD_VARIABLES}
    os.environ.update(dict.fromkeys(THREAD_VARIABLES, "1"))
    try:
        yield
    finally:
        for name, value in before.items():
            if value is None:
                os.environ.pop(name, None)
            else:
                os.environ[name] = value
