"""``hdetermine demo``: copy a simulated run that comes with the program."""

from __future__ import annotations

from pathlib import Path

import click


@click.command("demo")
@click.argument("name", required=False)
@click.option(
    "-o",
    "--output",
    "folder",
    type=click.Path(path_type=Path),
    metavar="FOLDER",
    help="Where to copy it; without it, a folder of the demo's name.",
)
def command(name: str | None, folder: Path | None) -> None:
    """Copy a demo, to look at and to try things on.

    Without NAME the demos are listed. All of them are simulated; what is behind the numbers
    stands beside them.
    """
    from hdetermine.errors import InputError
    from hdetermine.files.atomic import write_outputs
    from hdetermine.files.plaintext import plain_text, quoted
    from hdetermine.files.shipped import shipped_folder

    shipped = shipped_folder("demo_runs")
    names = sorted(path.name for path in shipped.iterdir() if path.is_dir())
    if name is None:
        for one in names:
            click.echo(one)
        return
    if name not in names:
        raise InputError(f"There is no demo called {quoted(name)}; there are {', '.join(names)}.")
    target = folder or Path(name)
    if target.is_dir() and any(target.iterdir()):
        raise InputError(f"{target} holds files already: name another folder with -o.")
    source = shipped / name
    files = sorted(path for path in source.rglob("*") if path.is_file())
    write_outputs(
        target, {path.relative_to(source).as_posix(): path.read_bytes() for path in files}
    )
    place = plain_text(click.format_filename(target))
    click.echo(f"{len(files)} files of the simulated demo {name} are in {place}.")
