"""Many runs over all cores, with a progress bar."""

from __future__ import annotations

import multiprocessing
import os
import warnings
from collections.abc import Callable, Sequence
from concurrent.futures import ProcessPoolExecutor, as_completed
from functools import partial

from .record import RunRecord, study_run
from .settings import Setting

Worker = Callable[[int], RunRecord]
Report = Callable[[int, int], None]
THREADS = ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS")


def run_study(
    setting: Setting,
    runs: int,
    jobs: int,
    report: Report | None = None,
    worker: Worker | None = None,
    first_seed: int = 1,
) -> list[RunRecord]:
    """Simulate and analyse runs with the seeds from `first_seed` on.

    The records come back in the order of their seeds, whatever the number of jobs.
    """
    work = worker or partial(study_run, setting)
    seeds = range(first_seed, first_seed + runs)
    told = report or (lambda _done, _of: None)
    if jobs <= 1:
        return list(_one_by_one(work, seeds, told))
    records: dict[int, RunRecord] = {}
    with worker_pool(jobs) as pool:
        futures = [pool.submit(work, seed) for seed in seeds]
        for future in as_completed(futures):
            record = future.result()
            records[record.seed] = record
            told(len(records), runs)
    return [records[seed] for seed in seeds]


def worker_pool(jobs: int) -> ProcessPoolExecutor:
    """Processes of one thread each, in which any warning is an error."""
    # Set before the processes start and import numpy.
    for name in THREADS:
        os.environ.setdefault(name, "1")
    context = multiprocessing.get_context("spawn")
    return ProcessPoolExecutor(jobs, context, initializer=_strict)


def _one_by_one(work: Worker, seeds: Sequence[int], told: Report) -> list[RunRecord]:
    records = []
    for seed in seeds:
        records.append(work(seed))
        told(len(records), len(seeds))
    return records


def _strict() -> None:
    """Any warning in a worker ends the study: the analysis must be silent."""
    warnings.simplefilter("error")
