"""``hdetermine simulate``: make a run whose truth is known."""

from __future__ import annotations

from pathlib import Path

import click


@click.command("simulate")
@click.argument("spec", type=click.Path(path_type=Path))
@click.option(
    "-o",
    "--output",
    "folder",
    type=click.Path(path_type=Path),
    required=True,
    metavar="RUN",
    help="Folder for the run; made if it is not there.",
)
@click.option("--seed", type=click.IntRange(min=0), default=1, show_default=True)
@click.option("--force", is_flag=True, help="Replace a run that stands there.")
def command(spec: Path, folder: Path, seed: int, force: bool) -> None:
    """Make the run that SPEC describes: a run sheet with a [truth] table.

    RUN receives run.toml, the scan tables and truth.toml. The same SPEC and seed give the same
    bytes. What the truth does not state is the run sheet's estimate or, with draw = true, a
    draw from its distribution.
    """
    from hdetermine.planning.runfiles import write_run
    from hdetermine.planning.simulation import simulate
    from hdetermine.planning.specification import read_specification

    simulated = simulate(read_specification(spec), seed)
    write_run(simulated, folder, replace=force)
    points = sum(counts.size for counts in simulated.counts)
    noun = "scan" if len(simulated.counts) == 1 else "scans"
    click.echo(
        f"{len(simulated.counts)} {noun} of together {points} points simulated with seed {seed}; "
        "truth.toml tells what is behind them."
    )
