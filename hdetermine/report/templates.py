"""Templates: ours, and those a laboratory puts in their place."""

from __future__ import annotations

import tomllib
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path
from typing import Any

from jinja2 import ChoiceLoader, Environment, FileSystemLoader, StrictUndefined
from markupsafe import Markup

from hdetermine.errors import InputError
from hdetermine.files.plaintext import quoted
from hdetermine.files.shipped import shipped_folder

WORDING = "wording.toml"


@dataclass(frozen=True, slots=True)
class Templates:
    """Where templates are looked for: the laboratory's own folder first, then ours.

    Attributes
    ----------
    folders : tuple of Path
        In the order in which they are searched.
    """

    folders: tuple[Path, ...]

    def find(self, name: str) -> Path:
        """Path of one template file."""
        for folder in self.folders:
            if (folder / name).is_file():
                return folder / name
        raise InputError(f"The template {quoted(name)} is missing; install hdetermine again.")

    def wording(self) -> dict[str, Any]:
        """Headings and standing sentences, shared by page and document."""
        path = self.find(WORDING)
        try:
            return tomllib.loads(path.read_text(encoding="utf-8"))
        except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
            raise InputError(
                f"The template file {quoted(path.name)} is no valid TOML ({error}); mend it."
            ) from error

    def environment(self) -> Environment:
        """Jinja2 environment for pages: everything escaped, nothing undefined let through."""
        return _environment(self.folders)

    def sources(self) -> dict[str, bytes]:
        """All files for the document by name, the laboratory's in place of ours."""
        return {
            path.name: path.read_bytes()
            for folder in reversed(self.folders)
            for path in sorted(folder.iterdir())
            if path.is_file() and path.suffix in (".typ", ".toml")
        }


@lru_cache(maxsize=8)
def _environment(folders: tuple[Path, ...]) -> Environment:
    environment = Environment(
        loader=ChoiceLoader([FileSystemLoader(folder) for folder in folders]),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    environment.filters["svg"] = Markup
    return environment


def find_templates(own: str | Path | None = None) -> Templates:
    """Find the templates to use.

    Parameters
    ----------
    own : path or None
        A folder of the laboratory's own; a file in it takes the place of ours of the same
        name, whatever it lacks is taken from ours.

    Raises
    ------
    InputError
        If that folder is missing or holds no template.
    """
    ours = shipped_folder("templates")
    if own is None:
        return Templates((ours,))
    folder = Path(own)
    known = sorted(path.name for path in ours.iterdir() if path.is_file())
    if not folder.is_dir():
        raise InputError(f"The template folder {quoted(own)} does not exist; name one that does.")
    if not any((folder / name).is_file() for name in known if not name.startswith(".")):
        raise InputError(
            f"The template folder {quoted(own)} holds none of the files it may replace; copy one "
            f"of {', '.join(name for name in known if not name.startswith('.'))} there and "
            "change it."
        )
    return Templates((folder.resolve(), ours))
