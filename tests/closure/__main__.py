"""``python -m tests.closure``: the whole study, with its tables and its picture."""

from __future__ import annotations

import json
import os
import tempfile
from collections.abc import Callable, Sequence
from functools import partial
from pathlib import Path

import click
import numpy as np
from rich.console import Console
from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeRemainingColumn

from hdetermine.planning.simulation import simulate_run

from .bound import NUISANCES, cutoff_bound_deg
from .picture import picture
from .record import RunRecord
from .settings import OFF_THE_MODEL, PINNED, SETTINGS, SHIFTED, Setting
from .study import Worker, run_study
from .tables import analysis_table, document, route_table, table
from .tally import StudyTally, tally

Runner = Callable[[Setting, Worker | None], list[RunRecord]]


@click.command()
@click.option("--runs", type=click.IntRange(min=2), default=400, show_default=True)
@click.option("--jobs", type=click.IntRange(min=1), default=os.cpu_count() or 1)
@click.option("--only", default="", help="Only studies whose name holds this text.")
@click.option("--independent/--own", default=False, help="Spectra of spekpy instead of our own.")
@click.option(
    "--cache",
    type=click.Path(path_type=Path),
    default=Path(tempfile.gettempdir()) / "hdetermine-spekpy",
    help="Folder that keeps spekpy's spectra.",
)
@click.option("-o", "--output", type=click.Path(path_type=Path), help="Folder for the results.")
def main(
    runs: int, jobs: int, only: str, independent: bool, cache: Path, output: Path | None
) -> None:
    """Simulate runs whose truth is known, analyse them, and print what came out."""
    console = Console(stderr=True)
    collected: dict[str, list[RunRecord]] = {}
    with Progress(
        TextColumn("{task.description}"), BarColumn(), MofNCompleteColumn(), TimeRemainingColumn(),
        console=console,
    ) as bar:  # fmt: skip

        def runner(setting: Setting, worker: Worker | None = None) -> list[RunRecord]:
            task = bar.add_task(setting.name, total=runs)

            def report(done: int, _of: int) -> None:
                bar.update(task, completed=done)

            records = run_study(setting, runs, jobs, report, worker)
            collected[setting.name] = records
            # A long study shows what it has as it goes.
            click.echo(document(f"Finished: {setting.name}", [tally(setting.name, records)]))
            return records

        if independent:
            texts, tallies = _independent(runner, only, cache, runs, jobs, bar)
        else:
            texts, tallies = _own(runner, only)
    text = "\n".join(texts)
    click.echo(f"## All studies\n\n{route_table(tallies)}\n{analysis_table(tallies)}")
    if output is not None:
        output.mkdir(parents=True, exist_ok=True)
        name = "independent" if independent else "closure"
        (output / f"{name}.md").write_text(text, "utf-8")
        records = {key: [one.as_dict() for one in found] for key, found in collected.items()}
        content = {"studies": [one.as_dict() for one in tallies], "runs": records}
        (output / f"{name}.json").write_text(json.dumps(content, indent=1, default=str), "utf-8")
        if collected:
            first = next(iter(collected.values()))
            (output / f"{name}.svg").write_bytes(picture(first, "svg"))
            (output / f"{name}.png").write_bytes(picture(first, "png"))


def _chosen(settings: Sequence[Setting], only: str) -> list[Setting]:
    return [setting for setting in settings if only.casefold() in setting.name.casefold()]


def _own(runner: Runner, only: str) -> tuple[list[str], list[StudyTally]]:
    texts, tallies = [], []
    for title, settings in (
        ("Truths drawn from the run sheet's distributions", SETTINGS),
        ("Truths off the model", OFF_THE_MODEL),
        ("A real difference", (SHIFTED,)),
    ):
        found = [tally(one.name, runner(one, None)) for one in _chosen(settings, only)]
        if found:
            texts.append(document(title, found))
            tallies += found
    for setting in _chosen((PINNED,), only):
        records = runner(setting, None)
        found = [tally(setting.name, records)]
        bounds = over_the_bound(setting, records)
        click.echo(bounds)
        texts.append(document("Spread of cutoffs", found, bounds))
        tallies += found
    return texts, tallies


def over_the_bound(setting: Setting, records: Sequence[RunRecord]) -> str:
    """Spread of each cutoff over its lower bound, in the windows that the fits chose."""
    _, simulated = simulate_run(setting.run_sheet(), setting.truth_table(1), 1)
    rows = []
    for scan, voltage in enumerate(setting.voltages_kV):
        mine = [
            record.cutoffs[scan] for record in records
            if record.cutoffs and record.cutoffs[scan].used
        ]  # fmt: skip
        if len(mine) < 3:
            continue
        low, high = np.median([cutoff.window_deg for cutoff in mine], axis=0)
        widest = max(cutoff.window_deg[1] for cutoff in mine)
        spread = float(np.std([cutoff.reading_error_deg for cutoff in mine], ddof=1))
        error = 1.0 / np.sqrt(2.0 * len(mine))
        counting = float(np.median([cutoff.counting_u_deg for cutoff in mine]))
        both = []
        for to_deg in (high, widest):
            for known in ((), ("tilt",)):
                free = [name for name in NUISANCES if name not in known]
                ratio = spread / cutoff_bound_deg(simulated, scan, (low, to_deg), free)
                both.append(f"{ratio:.2f}({ratio * error:.2f})")
        rows.append((
            f"{voltage:g}", f"{low:.1f} to {high:.1f}", both[0], both[1], f"{widest:.1f}",
            both[2], both[3], f"{spread:.4f}", f"{counting:.4f}",
        ))  # fmt: skip
    return table(
        ("kV", "median window/deg", "spread over the bound", "local slope known",
         "widest window to/deg", "spread over the bound", "local slope known", "spread/deg",
         "stated counting u/deg"),
        rows,
    )  # fmt: skip


def _independent(
    runner: Runner, only: str, cache: Path, runs: int, jobs: int, bar: Progress
) -> tuple[list[str], list[StudyTally]]:
    from .independent import INDEPENDENT, Library, independent_run

    tallies = []
    for tube in INDEPENDENT:
        if only.casefold() not in tube.setting.name.casefold():
            continue
        library = Library(cache, tube.target, tube.physics, tube.angle_deg)
        library.fill(tube.setting, runs, jobs, bar)
        worker = partial(independent_run, tube.setting, library)
        tallies.append(tally(tube.setting.name, runner(tube.setting, worker)))
    return [document("Independent spectra", tallies)] if tallies else [], tallies


if __name__ == "__main__":
    main()
