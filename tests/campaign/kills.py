"""Kill `hdetermine analyse` and `hdetermine check` at random moments, many times.

    python tests/campaign/kills.py --trials 200
    python tests/campaign/kills.py --trials 60 --command check

Each trial lays a whole old set of outputs beside a file of somebody else's, starts the command
with another seed or setting, and sends SIGINT, SIGTERM or SIGKILL: after a random time, among the
imports at its start, or some milliseconds after it began to write. Then:

* every visible output is one of the old set or one of the new; after SIGINT and SIGTERM the set
  is the old or the new one as a whole, nothing hidden is left in the output folder and nothing in
  the folder for temporary files;
* after SIGKILL the next writer clears what is left, and the set is whole then;
* the run folder, the other file and the folder around are as they were;
* no traceback was printed, and no process of the command lives on.

The script prints one line a trial and a summary; its exit status is 0 if nothing was found.
"""

from __future__ import annotations

import argparse
import os
import random
import shutil
import signal
import subprocess
import sys
import tempfile
import time
from collections import Counter
from pathlib import Path

from hdetermine.files.atomic import LOCK, write_outputs
from hdetermine.files.shipped import shipped_folder

SIGNALS = (signal.SIGINT, signal.SIGTERM, signal.SIGKILL)
FOREIGN = "notes.txt"
START_s = 0.06
"""Before that, or half as long again as the interpreter takes to start, it answers SIGINT in its
own way."""


def files_in(folder: Path) -> dict[str, bytes]:
    return {
        path.relative_to(folder).as_posix(): path.read_bytes()
        for path in folder.rglob("*")
        if path.is_file()
    }


def command_line(command: str, source: Path, out: Path, new: bool) -> list[str]:
    base = [sys.executable, "-m", "hdetermine", command, str(source), "-o", str(out)]
    if command == "check":
        return [*base, "--jobs", "2", *(["--anonymise"] if new else [])]
    return [*base, "--seed", "2" if new else "1", "--quiet"]


def survivors(group: int) -> bool:
    """Whether a process of the group is still there a little later."""
    for _ in range(100):
        try:
            os.killpg(group, 0)
        except ProcessLookupError:
            return False
        time.sleep(0.05)
    return True


class Campaign:
    """Old set, new set, and what was found wrong."""

    def __init__(self, command: str, source: Path, work: Path) -> None:
        self.command, self.source, self.work = command, source, work
        self.out = work / "out"
        self.temporary = work / "temporary"
        self.before = files_in(source)
        self.sets = []
        for new in (False, True):
            out = work / f"set{int(new)}"
            begin = time.monotonic()
            subprocess.run(command_line(command, source, out, new), check=True, capture_output=True)
            self.duration = time.monotonic() - begin
            self.sets.append(files_in(out))
        assert self.sets[0] != self.sets[1], "the two sets must differ"

    def trial(self, number: int, delay: float, writing: bool) -> tuple[str, list[str]]:
        """Outcome (`old`, `new`, `finished by the next run`) and complaints.

        The signal comes `delay` seconds after the start or, if `writing`, after the lock of the
        output folder was seen.
        """
        for folder in (self.out, self.temporary):
            shutil.rmtree(folder, ignore_errors=True)
        self.temporary.mkdir()
        write_outputs(self.out, {**self.sets[0], FOREIGN: b"somebody else's"})
        process = subprocess.Popen(
            command_line(self.command, self.source, self.out, True),
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            env={**os.environ, "TMPDIR": str(self.temporary)},
            start_new_session=True,
        )
        while writing and process.poll() is None and not (self.out / LOCK).exists():
            time.sleep(0.0005)
        time.sleep(delay)
        if number == signal.SIGKILL:
            process.kill()
        else:
            process.send_signal(number)
        try:
            _, stderr = process.communicate(timeout=30)
        except subprocess.TimeoutExpired:
            os.killpg(process.pid, signal.SIGKILL)
            process.communicate()
            return "hung", ["still ran after 30 s"]
        wrong = []
        if survivors(process.pid):
            wrong.append("a process lives on")
            os.killpg(process.pid, signal.SIGKILL)
        # Workers whose parent was killed may complain that they hear nothing more.
        if b"Traceback" in stderr and number != signal.SIGKILL:
            wrong.append(f"traceback: {stderr.decode(errors='replace')[-300:]!r}")
        # An interruption inside an import can end as -SIGINT: CPython remembers it, handled or not.
        allowed = (130, -signal.SIGINT, 0) if number != signal.SIGKILL else (-signal.SIGKILL, 0)
        if process.returncode not in allowed:
            wrong.append(f"exit status {process.returncode}")
        wrong += self.look_at_files()
        found = self.visible()
        outcome = self.name(found)
        if number != signal.SIGKILL:
            if outcome == "mixed":
                wrong.append("the set is mixed")
            if outcome == "new" and process.returncode != 0:
                outcome = "new, interrupted"
            if strays := [path.name for path in self.out.iterdir() if path.name.startswith(".")]:
                wrong.append(f"left in the output folder: {strays}")
            if strays := [path.name for path in self.temporary.iterdir()]:
                wrong.append(f"left among temporary files: {strays}")
        write_outputs(self.out, {})
        if outcome == "mixed":
            outcome = "finished by the next run"
        if self.name(self.visible()) == "mixed":
            wrong.append("the set is mixed after the next run")
        if [path for path in self.out.iterdir() if path.name.startswith(".")]:
            wrong.append("the next run did not clear what was left")
        return outcome, wrong

    def visible(self) -> dict[str, bytes]:
        found = files_in(self.out)
        return {name: found[name] for name in found if not name.startswith(".")}

    def name(self, found: dict[str, bytes]) -> str:
        own = {name: content for name, content in found.items() if name != FOREIGN}
        for name, whole in zip(("old", "new"), self.sets, strict=True):
            if own == whole:
                return name
        # Names of an old set that the new one does not have may stay.
        return "mixed"

    def look_at_files(self) -> list[str]:
        wrong = []
        found = self.visible()
        if found.pop(FOREIGN, None) != b"somebody else's":
            wrong.append("somebody else's file was touched")
        for name, content in found.items():
            if content not in (self.sets[0].get(name), self.sets[1].get(name)):
                wrong.append(f"{name} is neither old nor new")
        if files_in(self.source) != self.before:
            wrong.append("the run folder was touched")
        around = sorted(path.name for path in self.work.iterdir())
        if around != ["out", "set0", "set1", "source", "temporary"]:
            wrong.append(f"around the output folder: {around}")
        return wrong


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--trials", type=int, default=200)
    parser.add_argument("--command", choices=["analyse", "check"], default="analyse")
    parser.add_argument("--demo", default="", help="name of the demo; a fitting one if not given")
    parser.add_argument("--every", type=int, default=1, help="only each n-th scan of a run")
    parser.add_argument("--seed", type=int, default=1, help="of the random moments")
    options = parser.parse_args()
    # A job in the background of a shell inherits an ignored SIGINT, and hands it on.
    signal.signal(signal.SIGINT, signal.default_int_handler)
    demo = options.demo or (
        "molybdenum_rocksalt" if options.command == "analyse" else "class_of_twelve"
    )
    chance = random.Random(options.seed)
    outcomes: Counter[str] = Counter()
    faults = 0
    with tempfile.TemporaryDirectory() as name:
        work = Path(name)
        source = work / "source"
        shutil.copytree(shipped_folder("demo_runs") / demo, source)
        if options.every > 1:
            sheet = source / "run.toml"
            head, *scans = sheet.read_text("utf-8").split("[[scan]]")
            sheet.write_text("[[scan]]".join([head, *scans[:: options.every]]), "utf-8")
        campaign = Campaign(options.command, source, work)
        print(f"{options.command} of {demo} takes {campaign.duration:.1f} s undisturbed")
        began = time.monotonic()
        subprocess.run([sys.executable, "-c", "pass"], check=True)
        started_s = max(START_s, 1.5 * (time.monotonic() - began))
        for trial in range(options.trials):
            number = SIGNALS[trial % len(SIGNALS)]
            writing = trial // len(SIGNALS) % 3 == 2
            span = (campaign.duration, 0.05 * campaign.duration, 0.1)[trial // len(SIGNALS) % 3]
            delay = chance.uniform(0.0, span) + (0.0 if writing else started_s)
            outcome, wrong = campaign.trial(number, delay, writing)
            outcomes[f"{number.name}: {outcome}"] += 1
            faults += bool(wrong)
            when = f"{delay:6.3f} s{' of writing' if writing else ''}"
            print(f"{trial + 1:4d} {number.name:8s}{when:20s} {outcome}  {'; '.join(wrong)}")
    for outcome, count in sorted(outcomes.items()):
        print(f"{count:4d} x {outcome}")
    print(f"{options.trials} trials, {faults} with a fault")
    return 1 if faults else 0


if __name__ == "__main__":
    raise SystemExit(main())
