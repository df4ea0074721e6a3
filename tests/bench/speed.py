"""``python -m tests.bench.speed``: time and memory against their limits, on an idle machine.

* ``hdetermine --help`` at most 2.5 times ``python -c pass`` plus 0.15 s, both in turn;
* nine scans with all three routes, HTML and PDF: at most 10 s wall, caches of the interpreter
  warm, at most 500 MB;
* of which the edge fits take at most 0.15 s a scan.
"""

from __future__ import annotations

import os
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

from hdetermine.files.runsheet import read_run
from hdetermine.files.shipped import shipped_folder
from hdetermine.inference.anglescale import angle_scale
from hdetermine.inference.cutoffs import find_cutoffs

RUN = shipped_folder("demo_runs") / "molybdenum_rocksalt"
ROUNDS = 3


def wall_s(command: list[str]) -> tuple[float, float, float]:
    """Wall time of a process in s, its processor time in s, its largest memory in MB."""
    begin = time.monotonic()
    process = subprocess.Popen(command, stdout=subprocess.DEVNULL)
    _, status, usage = os.wait4(process.pid, 0)
    elapsed = time.monotonic() - begin
    process.returncode = os.waitstatus_to_exitcode(status)
    if process.returncode != 0:
        raise SystemExit(f"{command} ended with {process.returncode}")
    kilobytes = usage.ru_maxrss if sys.platform == "linux" else usage.ru_maxrss / 1024
    return elapsed, usage.ru_utime + usage.ru_stime, kilobytes / 1024


def start_up() -> list[tuple[str, float, float, str]]:
    pairs = []
    for _ in range(20):
        bare, *_ = wall_s([sys.executable, "-c", "pass"])
        shown, *_ = wall_s([sys.executable, "-m", "hdetermine", "--help"])
        pairs.append((bare, shown))
    bare = statistics.median(pair[0] for pair in pairs)
    shown = statistics.median(pair[1] for pair in pairs)
    return [("hdetermine --help", shown, 2.5 * bare + 0.15, f"s; python -c pass: {bare:.3f} s")]


def analysis() -> list[tuple[str, float, float, str]]:
    walls, processor, memories = [], [], []
    with tempfile.TemporaryDirectory() as out:
        command = [sys.executable, "-m", "hdetermine", "analyse", str(RUN), "-o", out, "--quiet"]
        wall_s(command)  # warms the caches
        for _ in range(ROUNDS):
            wall, busy, memory = wall_s(command)
            walls.append(wall)
            processor.append(busy)
            memories.append(memory)
        size = (Path(out) / "report.html").stat().st_size / 1e6
    return [
        (
            "nine scans, all routes, both reports",
            statistics.median(walls),
            10.0,
            f"s; processor time {statistics.median(processor):.1f} s",
        ),
        ("memory of that", max(memories), 500.0, "MB"),
        ("its report.html", size, 3.0, "MB"),
    ]


def edges() -> list[tuple[str, float, float, str]]:
    run = read_run(RUN)
    times = []
    for _ in range(ROUNDS):
        scale = angle_scale(run)
        begin = time.monotonic()
        find_cutoffs(run, scale)
        times.append((time.monotonic() - begin) / len(run.scans))
    return [("edge fits, each scan", statistics.median(times), 0.15, "s")]


def main() -> int:
    exceeded = 0
    for measure in (start_up, analysis, edges):
        for name, found, limit, unit in measure():
            verdict = "within" if found <= limit else "EXCEEDS"
            exceeded += found > limit
            print(f"{name:38s} {found:8.3f}  {verdict} {limit:.3f} {unit}")
    return 1 if exceeded else 0


if __name__ == "__main__":
    raise SystemExit(main())
