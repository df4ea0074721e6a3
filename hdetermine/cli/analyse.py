"""``hdetermine analyse``: from a folder of counts to h and a report."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import click

OUTPUTS = ("result.json", "cutoffs.csv", "budget.csv", "report.html", "report.pdf")


@click.command("analyse")
@click.argument("run_folder", metavar="RUN", type=click.Path(path_type=Path))
@click.option(
    "-o",
    "--output",
    "out",
    metavar="OUT",
    type=click.Path(path_type=Path),
    help="Folder for the results; RUN/result if not given.",
)
@click.option("--seed", type=click.IntRange(min=0), default=1, show_default=True,
              help="Seed of the Monte Carlo and posterior routes.")  # fmt: skip
@click.option("--linear-only", is_flag=True, help="Leave out the Monte Carlo and posterior routes.")
@click.option("--brief", is_flag=True, help="One-page reports.")
@click.option("--paper", type=click.Choice(["a4", "us-letter"]), default="a4", show_default=True,
              help="Paper of report.pdf.")  # fmt: skip
@click.option("--laboratory", default="", help="Name of the laboratory on the reports.")
@click.option("--templates", type=click.Path(path_type=Path), metavar="DIR",
              help="A folder of your own templates.")  # fmt: skip
@click.option("--quiet", is_flag=True, help="Print no summary.")
def command(
    run_folder: Path,
    out: Path | None,
    seed: int,
    linear_only: bool,
    brief: bool,
    paper: str,
    laboratory: str,
    templates: Path | None,
    quiet: bool,
) -> None:
    """Analyse the run in the folder RUN.

    RUN holds run.toml and its scan tables. OUT receives result.json, cutoffs.csv, budget.csv,
    report.html and report.pdf, all of them or none.
    """
    from hdetermine.cli.progress import working
    from hdetermine.determination import determine
    from hdetermine.files.atomic import write_outputs
    from hdetermine.files.plaintext import plain_text
    from hdetermine.files.resultfile import budget_csv, cutoffs_csv, result_json
    from hdetermine.files.runfolder import output_folder
    from hdetermine.files.runsheet import read_run
    from hdetermine.report.document import report_document
    from hdetermine.report.html import render_html
    from hdetermine.report.pdf import render_pdf
    from hdetermine.report.summary import summary_lines
    from hdetermine.report.templates import find_templates

    find_templates(templates)  # a wrong folder is told before the work, not after it
    run = read_run(run_folder)
    target = out if out is not None else output_folder(run_folder, "result")
    write_outputs(target, {})  # so is a folder that cannot be written to
    with working("analysing") as progress:
        result = determine(
            run, seed, posterior=not linear_only, monte_carlo=not linear_only, progress=progress
        )
        progress("figures", 0, 1)
        document = report_document(result, brief=brief, laboratory=laboratory)
        makers: dict[str, Callable[[], bytes]] = {
            "result.json": lambda: result_json(result),
            "cutoffs.csv": lambda: cutoffs_csv(result),
            "budget.csv": lambda: budget_csv(result),
            "report.html": lambda: render_html(result, templates=templates, document=document),
            "report.pdf": lambda: render_pdf(
                result, paper=paper, templates=templates, document=document
            ),
        }
        outputs = {}
        for done, (name, make) in enumerate(makers.items()):
            progress("reports", done, len(makers))
            outputs[name] = make()
        write_outputs(target, outputs)
    if not quiet:
        click.echo("\n".join(summary_lines(result)))
        place = plain_text(click.format_filename(target))
        click.echo(f"\n  Written to {place}: {', '.join(OUTPUTS)}")
