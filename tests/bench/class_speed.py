"""``python -m tests.bench.class_speed``: a class of 200 groups of six scans, on an idle machine.

* the check takes at most 90 s wall on two processors;
* half the groups take half the time, and one process twice the time of two (printed as ratios);
* the memory of the checking process hardly grows with the number of groups.
"""

from __future__ import annotations

import argparse
import sys
import tempfile
from pathlib import Path

import numpy as np

from hdetermine.files.atomic import write_outputs
from hdetermine.planning.runfiles import run_files

from ..closure.students import claim_text, do_work, make_bench
from .speed import wall_s

LONGEST_s = 90.0
SEED = 7000


def make_class(folder: Path, groups: int) -> None:
    """Simulate groups of six scans; each claims what an honest student reads."""
    for number in range(groups):
        bench = make_bench(SEED + number)
        files = {
            name: content
            for name, content in run_files(bench.simulated).items()
            if name == "run.toml" or name.endswith(".csv")
        }
        work = do_work(bench, np.random.default_rng([SEED, number]), shows="wavelength")
        write_outputs(
            folder / f"group {number + 1}", {**files, "claim.toml": claim_text(work).encode()}
        )


def check(folder: Path, jobs: int) -> tuple[float, float]:
    """Wall time of one check in s, and the memory of its largest process in MB."""
    with tempfile.TemporaryDirectory() as out:
        command = [sys.executable, "-m", "hdetermine", "check", str(folder), "-o", out]
        wall, _, memory = wall_s([*command, "--quiet", "--jobs", str(jobs)])
    return wall, memory


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--groups", type=int, default=200)
    groups = parser.parse_args().groups
    with tempfile.TemporaryDirectory() as name:
        whole, part = Path(name) / "whole", Path(name) / "part"
        make_class(whole, groups)
        make_class(part, groups // 2)
        wall, memory = check(whole, 2)
        half, half_memory = check(part, 2)
        alone, _ = check(part, 1)
    limit = LONGEST_s * groups / 200.0
    print(f"{groups} groups, two processes: {wall:.1f} s (limit {limit:.0f} s), {memory:.0f} MB")
    print(f"half the groups: {half / wall:.2f} of the time, {half_memory:.0f} MB")
    print(f"half the groups, one process: {alone / half:.2f} times as long as two")
    return 0 if wall <= limit else 1


if __name__ == "__main__":
    sys.exit(main())
