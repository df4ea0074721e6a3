"""``hdetermine budget``: print, write and probe the uncertainty budget."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

if TYPE_CHECKING:
    from rich.console import Console

    from hdetermine.budget.suppose import BudgetStudy
    from hdetermine.records.results import MeasurementModel
    from hdetermine.report.table import Table

FORMATS = ("csv", "json", "tex", "md")
SHEET, RESULT = "run.toml", "result.json"
NARROW = 118
WIDE = 170
LEFT_OUT = ("symbol", "distribution", "ν", "sensitivity")
SHOWN_IMPROVEMENTS = 8


@click.command("budget")
@click.argument("source", metavar="RUN|RESULT", type=click.Path(path_type=Path))
@click.option("--suppose", "texts", metavar="INPUT.u=NUMBER", multiple=True,
              help="What if? The new U beside the old: .u=, .half_width= or .dof= of an input, "
              "in its unit; scan.*.counting_deg stands for all scans. Repeatable.")  # fmt: skip
@click.option("-o", "--output", "out", metavar="OUT", type=click.Path(path_type=Path),
              help="Folder for budget.csv, .json, .tex and .md; 'budget' beside the result, or in "
              "RUN, if not given.")  # fmt: skip
@click.option("--format", "formats", type=click.Choice(FORMATS), multiple=True,
              help="Write only this format. Repeatable.")  # fmt: skip
@click.option("--each-scan", is_flag=True, help="List the inputs of every scan one by one.")
def command(
    source: Path,
    texts: tuple[str, ...],
    out: Path | None,
    formats: tuple[str, ...],
    each_scan: bool,
) -> None:
    """Account for the uncertainty of h.

    RUN is a folder with run.toml, which is analysed first; RESULT is a result.json, or a folder
    that holds one. Nothing is fitted again for a --suppose.
    """
    from hdetermine.budget.suppose import study
    from hdetermine.files.atomic import write_outputs
    from hdetermine.files.plaintext import plain_text
    from hdetermine.files.runfolder import output_folder
    from hdetermine.report.budget_files import budget_files

    model, beside = _model(source)
    found = study(model, texts)
    outputs = budget_files(found, dict.fromkeys(formats or FORMATS))
    target = out if out is not None else output_folder(beside, "budget")
    write_outputs(target, outputs)
    _print(found, each_scan)
    place = plain_text(click.format_filename(target))
    click.echo(f"Written to {place}: {', '.join(outputs)}")


def _model(source: Path) -> tuple[MeasurementModel, Path]:
    """The measurement model, and the folder beside which to write."""
    from hdetermine.errors import InputError
    from hdetermine.files.resultfile import load_model

    if source.is_dir() and (source / SHEET).exists():
        from hdetermine.cli.progress import working
        from hdetermine.determination import determine
        from hdetermine.files.runsheet import read_run

        run = read_run(source)
        with working("analysing") as progress:
            found = determine(run, posterior=False, monte_carlo=False, progress=progress)
        return found.model, source
    if source.is_dir():
        if not (source / RESULT).exists():
            raise InputError(
                f"{click.format_filename(source)} holds neither {SHEET} nor {RESULT}: give the "
                "folder of a run, or the result of an analysis."
            )
        return load_model(source / RESULT), source
    return load_model(source), source.parent


def _print(found: BudgetStudy, each_scan: bool) -> None:
    from rich.console import Console

    from hdetermine.report import budget_tables as tables
    from hdetermine.report.rows_budget import budget_rows

    console = Console(highlight=False)
    if not console.is_terminal:
        console = Console(highlight=False, width=WIDE)
    full = budget_rows(found.budget)
    if not each_scan:
        full = tables.condensed(full, found.budget)
    console.print(tables.headline(found.budget), markup=False)
    console.print()
    _print_table(console, tables.source_table(found.budget))
    _print_table(console, full)
    _print_table(console, tables.improvement_table(found, SHOWN_IMPROVEMENTS))
    if found.supposed is not None:
        _print_table(console, tables.supposition_table(found.supposed))
        _print_table(console, tables.what_if_table(found.supposed))


def _print_table(console: Console, table: Table) -> None:
    """Set a table; a narrow terminal shows fewer columns, the files hold all."""
    from rich.box import SIMPLE_HEAD
    from rich.table import Table as Grid
    from rich.text import Text

    shown = [
        i
        for i, column in enumerate(table.columns)
        if console.width >= NARROW or column.heading not in LEFT_OUT
    ]
    console.print(Text(table.caption, style="bold"))
    for group in table.groups:
        if group.heading:
            console.print(Text(group.heading, style="italic"))
        grid = Grid(box=SIMPLE_HEAD, pad_edge=False)
        for column in (table.columns[i] for i in shown):
            grid.add_column(
                Text(column.heading),
                justify="right" if column.numeric else "left",
                no_wrap=column.numeric,
            )
        for row in group.rows:
            cells = (row[i] for i in shown)
            grid.add_row(
                *(Text(f"{one.text}_{one.subscript}" if one.subscript else one.text)
                  for one in cells)
            )  # fmt: skip
        console.print(grid)
    if table.note:
        console.print(Text(table.note))
    console.print()
