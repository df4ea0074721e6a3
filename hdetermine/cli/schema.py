"""``hdetermine schema``: print the JSON Schema of result.json."""

from __future__ import annotations

import click


@click.command("schema")
def command() -> None:
    """Print the JSON Schema of result.json (draft 2020-12)."""
    from hdetermine.files.resultfile import schema_text

    click.echo(schema_text(), nl=False)
