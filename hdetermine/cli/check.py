"""``hdetermine check``: a class of groups, their data, their claims and likely slips."""

from __future__ import annotations

from pathlib import Path

import click

DEFAULT_OUT = "class_check"


@click.command("check")
@click.argument("class_folder", metavar="CLASS", type=click.Path(path_type=Path))
@click.option(
    "-o",
    "--output",
    "out",
    metavar="OUT",
    type=click.Path(path_type=Path),
    help=f"Folder for the results; CLASS/{DEFAULT_OUT} if not given.",
)
@click.option("--jobs", type=click.IntRange(min=1, max=256), metavar="N",
              help="Processes at once; one a processor if not given.")  # fmt: skip
@click.option("--anonymise", is_flag=True, help="Put codes in place of names, everywhere.")
@click.option("--pdf", is_flag=True, help="Write each group's feedback as a PDF too.")
@click.option("--seed", type=click.IntRange(min=0), default=1, show_default=True,
              help="Seed of the re-analyses, and key of the codes.")  # fmt: skip
@click.option("--templates", type=click.Path(path_type=Path), metavar="DIR",
              help="A folder of your own templates.")  # fmt: skip
@click.option("--quiet", is_flag=True, help="Print no summary.")
def command(
    class_folder: Path,
    out: Path | None,
    jobs: int | None,
    anonymise: bool,
    pdf: bool,
    seed: int,
    templates: Path | None,
    quiet: bool,
) -> None:
    """Check the class in the folder CLASS.

    CLASS holds a sub-folder a group, with scans and run.toml (or one run.toml at the top for
    those that have none), and the claims: claim.toml in a group's folder, or claims.csv or
    claims.xlsx at the top. OUT receives class.html, class.csv, class.xlsx, class.json and a page
    of feedback a group, all of them or none.
    """
    import os

    from hdetermine.classcheck.classfiles import class_outputs, earlier_feedback
    from hdetermine.classcheck.classwork import check_class
    from hdetermine.classcheck.summary import summary_lines
    from hdetermine.cli.progress import working
    from hdetermine.files.atomic import write_outputs
    from hdetermine.files.plaintext import plain_text
    from hdetermine.files.runfolder import output_folder
    from hdetermine.report.templates import find_templates

    found_templates = find_templates(templates)
    target = out if out is not None else output_folder(class_folder, DEFAULT_OUT)
    if class_folder.is_dir():
        write_outputs(target, {})  # a folder that cannot be written to is told before the work
    with working("checking") as progress:
        finding = check_class(
            class_folder,
            target,
            jobs=jobs or len(os.sched_getaffinity(0)),
            seed=seed,
            anonymise=anonymise,
            progress=progress,
        )
        outputs = class_outputs(finding, found_templates, pdf=pdf, progress=progress)
        write_outputs(target, outputs, retired=earlier_feedback(target))
    if not quiet:
        click.echo("\n".join(summary_lines(finding)))
        place = plain_text(click.format_filename(target))
        click.echo(
            f"\n  Written to {place}: class.html, class.csv, class.xlsx, class.json, feedback"
        )
