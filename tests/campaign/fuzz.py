"""The long campaign of damaged files.

``python tests/campaign/fuzz.py [--inputs N] [--first SEED]``

Not part of the ordinary tests. Every input is one seed: the kind of file, the specimen and the
damage all follow from it, so that any finding can be repeated with ``--first SEED --inputs 1``.
The work is done in child processes, one for each thousand seeds, with 1 GB of memory, so that an
abort is a finding too. Exit status 0 if there were none.
"""

from __future__ import annotations

import argparse
import json
import random
import resource
import shutil
import subprocess
import sys
import tempfile
import time
import traceback
from collections import Counter
from pathlib import Path

HERE = Path(__file__).resolve()
sys.path.insert(0, str(HERE.parents[1]))

CHUNK = 1000
MEMORY_BYTES = 1 << 30
LONGEST_s = 10.0
"""Of processor time an input, so that other work on the machine does not count."""
HANGS_s = 1800.0
"""A thousand inputs that take this long hang."""

KINDS = ("run sheet", "table", "table", "xlsx", "ods", "draft", "bytes")
ANALYSED = "analysis"
CLAIM_KINDS = ("claim sheet", "claim table", "claim table", "claims xlsx")


def one_input(seed: int, folder: Path) -> tuple[str, str]:
    """Make the input of a seed and read it; returns its kind and ``read`` or ``refused``."""
    import file_specimens
    from file_mutations import damaged, damaged_archive
    from sheet_text import SHEET

    from hdetermine.errors import InputError
    from hdetermine.files.draft import draft_sheet
    from hdetermine.files.runsheet import read_run

    chance = random.Random(seed)
    kind = chance.choice((*KINDS, *CLAIM_KINDS, ANALYSED))
    if kind == ANALYSED:
        return kind, one_analysis(chance, folder)
    if kind in CLAIM_KINDS:
        return kind, one_class_of_claims(kind, chance, folder)
    more, text = chance.choice(file_specimens.TABLES)
    sheet, table = file_specimens.sheet_for(more).encode(), text.encode()
    if kind == "run sheet":
        sheet = damaged(sheet, chance)
    elif kind in ("table", "draft"):
        table = damaged(table, chance)
    elif kind == "bytes":
        table = chance.randbytes(chance.randrange(2000))
    else:
        sheet = SHEET.encode()
        make = file_specimens.xlsx if kind == "xlsx" else file_specimens.ods
        table = damaged_archive(make(), chance)
    (folder / "run.toml").write_bytes(sheet)
    (folder / "a.csv").write_bytes(table)
    try:
        if kind == "draft":
            draft_sheet(folder)
        else:
            read_run(folder)
    except InputError as error:
        check_sentence(str(error))
        return kind, "refused"
    return kind, "read"


def check_sentence(text: str) -> None:
    """Fail unless a refusal is one plain sentence."""
    from hdetermine.files.plaintext import plain_text

    assert text == plain_text(text), "not plain text"
    assert text.endswith("."), "not a sentence"


def one_analysis(chance: random.Random, folder: Path) -> str:
    """Damage one file of a whole run, and determine h from what can be read of it."""
    import file_specimens
    from file_mutations import change_digits, damaged

    from hdetermine.determination import determine
    from hdetermine.errors import InputError
    from hdetermine.files.runsheet import read_run

    top = folder / "whole run"
    top.mkdir(exist_ok=True)
    files = dict(file_specimens.small_run())
    name = chance.choice(sorted(name for name in files if name.endswith((".csv", "run.toml"))))
    # Changed digits are read most often, and then there is something to determine.
    files[name] = chance.choice((change_digits, change_digits, damaged))(files[name], chance)
    for name, content in files.items():
        (top / name).write_bytes(content)
    try:
        found = determine(read_run(top), posterior=False, monte_carlo=False)
    except InputError as error:
        check_sentence(str(error))
        return "refused"
    assert 0.0 < found.h.standard_uncertainty_J_s < float("inf"), "no sound uncertainty"
    assert found.h.value_J_s > 0.0, "no sound value"
    return "determined"


def one_class_of_claims(kind: str, chance: random.Random, folder: Path) -> str:
    """Make a class that has nothing but damaged claims, and check them against themselves."""
    import file_specimens
    from file_mutations import damaged, damaged_archive

    from hdetermine.classcheck.claimalone import check_alone
    from hdetermine.classcheck.groups import find_groups
    from hdetermine.errors import InputError

    top = folder / "class"
    shutil.rmtree(top, ignore_errors=True)
    (top / "alder").mkdir(parents=True)
    if kind == "claim sheet":
        sheet = damaged(file_specimens.CLAIM_SHEET.encode(), chance)
        (top / "alder" / "claim.toml").write_bytes(sheet)
    elif kind == "claim table":
        table = chance.choice(file_specimens.CLAIM_TABLES).encode()
        (top / "claims.csv").write_bytes(damaged(table, chance))
    else:
        (top / "claims.xlsx").write_bytes(damaged_archive(file_specimens.claims_xlsx(), chance))
    try:
        groups, _ = find_groups(top, top / "out")
    except InputError as error:
        check_sentence(str(error))
        return "refused"
    for group in groups:
        if group.claim_fault:
            check_sentence(group.claim_fault)
        if group.claim is not None:
            check_alone(group.claim, None)
    return "refused" if any(group.claim_fault for group in groups) else "read"


def child(first: int, number: int) -> None:
    """Read a stretch of seeds; prints its counts as JSON, the current seed on standard error."""
    resource.setrlimit(resource.RLIMIT_DATA, (MEMORY_BYTES, MEMORY_BYTES))
    counts: Counter[str] = Counter()
    findings: list[str] = []
    slowest = 0.0
    with tempfile.TemporaryDirectory() as name:
        for seed in range(first, first + number):
            print(seed, file=sys.stderr, flush=True)
            began = time.process_time()
            try:
                kind, outcome = one_input(seed, Path(name))
                counts[f"{kind}: {outcome}"] += 1
            except BaseException:  # a panic inside the spreadsheet reader is no Exception
                findings.append(f"seed {seed}: {traceback.format_exc()}")
            took = time.process_time() - began
            slowest = max(slowest, took)
            if took > LONGEST_s:
                findings.append(f"seed {seed}: took {took:.1f} s")
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    json.dump(
        {"counts": counts, "findings": findings, "slowest_s": slowest, "peak_MB": peak}, sys.stdout
    )


def campaign(first: int, inputs: int) -> int:
    """Run all stretches one after the other and print what came of them."""
    counts: Counter[str] = Counter()
    findings: list[str] = []
    slowest = peak = 0.0
    for start in range(first, first + inputs, CHUNK):
        number = min(CHUNK, first + inputs - start)
        command = [sys.executable, str(HERE), "--child"]
        command += ["--first", str(start), "--inputs", str(number)]
        try:
            done = subprocess.run(
                command, capture_output=True, text=True, check=False, timeout=HANGS_s
            )
        except subprocess.TimeoutExpired as error:
            findings.append(f"hangs at seed {(error.stderr or b'')[-20:]!r}")
            continue
        if done.returncode != 0:
            findings.append(f"process ended with {done.returncode}: {done.stderr[-2000:]}")
            continue
        result = json.loads(done.stdout)
        counts.update(result["counts"])
        findings += result["findings"]
        slowest, peak = max(slowest, result["slowest_s"]), max(peak, result["peak_MB"])
        print(f"{start + number - first} of {inputs}, {len(findings)} findings", flush=True)
    for name, count in sorted(counts.items()):
        print(f"{name:24} {count:7}")
    print(f"inputs {sum(counts.values())}, slowest {slowest:.2f} s, peak memory {peak:.0f} MB")
    for finding in findings:
        print(finding)
    return 1 if findings else 0


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--inputs", type=int, default=20_000)
    parser.add_argument("--first", type=int, default=1)
    parser.add_argument("--child", action="store_true", help=argparse.SUPPRESS)
    wanted = parser.parse_args()
    if wanted.child:
        child(wanted.first, wanted.inputs)
        return 0
    return campaign(wanted.first, wanted.inputs)


if __name__ == "__main__":
    sys.exit(main())
