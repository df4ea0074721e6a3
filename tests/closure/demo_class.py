"""Make demo_runs/class_of_twelve: a simulated class whose truth table is known.

    python -m tests.closure.demo_class [FOLDER]

The counts come from the simulator, the claims from the arithmetic of `students` with the slips
of `slipmaking`; the check that is tested with them has no part in either.
"""

from __future__ import annotations

import argparse
import csv
import io
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from hdetermine.files.atomic import write_outputs
from hdetermine.planning.runfiles import run_files

from .slipmaking import doubled, lattice, no_zero, straight_line, wrong_unit
from .students import Bench, Hook, Work, claim_text, do_work, make_bench

SEED = 4300
FOLDER = Path(__file__).resolve().parents[2] / "demo_runs" / "class_of_twelve"


@dataclass(frozen=True)
class Member:
    """One group of the class."""

    name: str
    story: str
    verdict: str
    slips: str = ""
    screening: str = ""
    hooks: tuple[tuple[str, Hook], ...] = ()
    shows: str = "wavelength"
    seed: int = 0


def _ruler(work: Work) -> None:
    """Lay the line, and later combine the voltages without an intercept, as usual."""
    work.notes["ways"] = 2
    straight_line(work)


def _small_u(work: Work) -> None:
    work.standard, work.expanded = abs(work.h) * 0.0011, None


def _joules(work: Work) -> None:
    """Turn a value into J s, for groups whose slip depends on the unit."""
    if work.unit == "eV s":
        work.h, work.unit = work.h * 1.602176634e-19, "J s"


def _joules_then(hook: Hook) -> Hook:
    def both(work: Work) -> None:
        _joules(work)
        hook(work)

    return both


def _stated(work: Work) -> None:
    """One and a half percent, which is fair."""
    work.standard, work.expanded = abs(work.h) * 0.015, None


MEMBERS: tuple[Member, ...] = (
    Member("alder", "clean; careful readings, fair uncertainty", "agrees",
           hooks=(("h", _stated),)),
    Member("birch", "clean; angles and wavelengths claimed", "agrees", shows="both",
           hooks=(("h", _stated),)),
    Member("cedar", "2 theta used as theta", "slip", "double_angle", shows="angle",
           hooks=(("angle", doubled),)),
    Member("elder", "lattice parameter used for the spacing", "slip", "lattice_parameter",
           shows="both", hooks=(("angle", lattice),)),
    Member("hazel", "straight line through the rise followed down to the axis, and an "
           "uncertainty far too small", "slip", "straight_line_crossing",
           hooks=(("reading", _ruler), ("h", _small_u))),
    Member("juniper", "h in eV s labelled J s", "slip", "electronvolt_or_joule",
           hooks=(("h", _joules_then(wrong_unit)),)),
    Member("larch", "two slips: 2 theta used as theta, and h in eV s labelled J s", "slip",
           "double_angle+electronvolt_or_joule", shows="angle",
           hooks=(("angle", doubled), ("h", _joules_then(wrong_unit)))),
    Member("maple", "clean claim, but the counts were smoothed (running mean of three)",
           "agrees", "", "scatter is not Poisson's", hooks=(("h", _stated),)),
    Member("oak", "clean claim, but 20 counts of one scan are those of alder", "agrees", "",
           "identical counts", hooks=(("h", _stated),)),
    Member("pine", "a scan ends early, in a line that holds a word for a number", "nothing"),
    Member("rowan", "a claim without data: its wavelengths do not give its h", "inconsistent"),
    Member("willow", "zero offset of the goniometer not corrected", "slip", "zero_offset",
           shows="angle", hooks=(("angle", no_zero),)),
)  # fmt: skip
"""In the order of the alphabet: names of trees, nobody's."""


def make_files() -> dict[str, bytes]:
    """Make every file of the class by name."""
    files: dict[str, bytes] = {}
    claims: list[dict[str, str]] = []
    benches = [_bench(number) for number in range(len(MEMBERS))]
    for number, (member, bench) in enumerate(zip(MEMBERS, benches, strict=True)):
        made = _scans(run_files(bench.simulated))
        if member.name == "maple":
            made = {
                name: _changed(content, _smoothed) if name.endswith(".csv") else content
                for name, content in made.items()
            }
        if member.name == "pine":
            whole = made["scan_26kV.csv"].splitlines(keepends=True)
            made["scan_26kV.csv"] = b"".join(whole[:40]) + b"7.4,twelve\n"
        if member.name != "rowan":
            files.update({f"{member.name}/{name}": content for name, content in made.items()})
        if member.name == "pine":
            continue
        work = _work(member, bench, number)
        if member.name == "rowan":
            work.h *= 1.21
        if number % 2 or member.name == "rowan":
            claims.append(_claim_row(member.name, work))
        else:
            files[f"{member.name}/claim.toml"] = claim_text(work).encode()
    files["oak/scan_29kV.csv"] = _copied(files["oak/scan_29kV.csv"], files["alder/scan_29kV.csv"])
    files["run.toml"] = run_files(benches[0].simulated)["run.toml"]
    files["claims.csv"] = _table(claims)
    files["truth_table.csv"] = _table(
        [
            {
                "group": member.name, "verdict": member.verdict, "first_slip": member.slips,
                "screening": "identical counts" if member.name == "alder" else member.screening,
                "story": member.story,
            }
            for member in MEMBERS
        ]
    )  # fmt: skip
    files["PROVENANCE.md"] = _PROVENANCE.encode()
    return files


def _bench(number: int) -> Bench:
    rng = np.random.default_rng([SEED, number])
    zero = float(rng.choice([-1.0, 1.0]) * rng.uniform(0.05, 0.15))
    if MEMBERS[number].name == "willow":
        zero = 0.34
    return make_bench(SEED + number, zero_deg=zero, dwell_s=10.0)


def _work(member: Member, bench: Bench, number: int) -> Work:
    rng = np.random.default_rng([SEED, number, 1])
    return do_work(bench, rng, dict(member.hooks), single=0.005, common=0.002, shows=member.shows)


def _scans(files: dict[str, bytes]) -> dict[str, bytes]:
    """Leave the run sheet out: the class has one for all."""
    return {name: content for name, content in files.items() if name != "run.toml"}


def _changed(content: bytes, change: Callable[[list[int]], list[int]]) -> bytes:
    head, *lines = content.decode().splitlines()
    angles, counts = zip(*(line.split(",") for line in lines), strict=True)
    changed = change([int(count) for count in counts])
    rows = [f"{angle},{count}" for angle, count in zip(angles, changed, strict=True)]
    return ("\n".join([head, *rows]) + "\n").encode()


def _smoothed(counts: list[int]) -> list[int]:
    inner = [round(sum(counts[i - 1 : i + 2]) / 3.0) for i in range(1, len(counts) - 1)]
    return [counts[0], *inner, counts[-1]]


def _copied(target: bytes, source: bytes) -> bytes:
    """Put 20 counts of one table in place of those at the same angles of another."""
    theirs = dict(line.split(",") for line in source.decode().splitlines())
    lines = target.decode().splitlines()
    first = next(i for i, line in enumerate(lines) if line.startswith("8.2,"))
    for i in range(first, first + 20):
        angle = lines[i].split(",")[0]
        lines[i] = f"{angle},{theirs[angle]}"
    return ("\n".join(lines) + "\n").encode()


def _claim_row(name: str, work: Work) -> dict[str, str]:
    """A row of the claim table; units in the headers."""
    row = {"group": name, "h": f"{work.h:.3e}", "unit": work.unit, "u": "", "U": "", "k": ""}
    if work.standard is not None:
        row["u"] = f"{work.standard:.1e}"
    if work.expanded is not None:
        row["U"], row["k"] = f"{work.expanded:.1e}", "2"
    for i, voltage in enumerate(work.bench.voltage):
        row[f"wavelength {voltage:g} kV [pm]"] = (
            f"{work.wavelength[i]:.1f}" if work.shows in ("wavelength", "both") else ""
        )
        row[f"theta {voltage:g} kV [deg]"] = (
            f"{work.angle[i]:.2f}" if work.shows in ("angle", "both") else ""
        )
    return row


def _table(rows: list[dict[str, str]]) -> bytes:
    stream = io.StringIO()
    writer = csv.DictWriter(stream, list(rows[0]), lineterminator="\n")
    writer.writeheader()
    writer.writerows(rows)
    return stream.getvalue().encode()


_PROVENANCE = """# Simulated class: twelve groups

**Nothing here was measured, and nobody stands behind a name.** The practical of Lower Mill is \
invented; its groups are called after trees. Counts and claims were computed, with a known story \
for every group, and this command makes them again, byte for byte:

    python -m tests.closure.demo_class

A copper tube, a lithium fluoride crystal (200), six voltages from 20 to 35 kV in 0.1° steps with \
10 s a step; the scan at 35 kV runs on over the K lines. One `run.toml` serves all groups. Claims \
stand partly in `claims.csv`, partly in each group's `claim.toml`.

`truth_table.csv` tells what was done to each group: the verdict that the check should reach, the \
slip that it should name first, and what the screening should find, in the words of `class.json` \
(`verdict`, `slips.codes`, `screening.title`). To see what it makes of them:

    hdetermine check class_of_twelve -o somewhere
"""


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("folder", nargs="?", type=Path, default=FOLDER)
    write_outputs(parser.parse_args().folder, make_files())


if __name__ == "__main__":
    main()
