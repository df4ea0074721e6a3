"""``hdetermine draft``: write a run sheet from what a folder holds."""

from __future__ import annotations

from pathlib import Path

import click


@click.command("draft")
@click.argument("folder", type=click.Path(path_type=Path))
@click.option("--print", "to_terminal", is_flag=True, help="Print it; write nothing.")
@click.option("--force", is_flag=True, help="Replace a run.toml that stands there.")
def command(folder: Path, to_terminal: bool, force: bool) -> None:
    """Write FOLDER/run.toml from the scan tables in FOLDER.

    Every guess is marked GUESS, everything that only you can know is marked FILL IN. A run.toml
    that stands there is never replaced without --force.
    """
    from hdetermine.errors import InputError
    from hdetermine.files.atomic import write_outputs
    from hdetermine.files.draft import FILL_IN, GUESS, draft_sheet
    from hdetermine.files.runsheet import SHEET_NAME

    text = draft_sheet(folder)
    if to_terminal:
        click.echo(text, nl=False)
        return
    path = folder / SHEET_NAME
    if (path.exists() or path.is_symlink()) and not force:
        raise InputError(
            f"{SHEET_NAME}: it stands in this folder already; print the draft with --print, or "
            "replace it with --force."
        )
    write_outputs(folder, {SHEET_NAME: text.encode("utf-8")})
    body = [line for line in text.splitlines() if not line.startswith("#")]
    guesses = sum(GUESS in line for line in body)
    gaps = sum(FILL_IN in line for line in body)
    click.echo(
        f"{SHEET_NAME} drafted: {text.count('[[scan]]')} scans, {guesses} guesses to check, "
        f"{gaps} lines to fill in."
    )
