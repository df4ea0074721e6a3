"""Folders that come with the program: in a checkout beside the package, installed inside it."""

from __future__ import annotations

from pathlib import Path

from hdetermine.errors import InputError

PACKAGE = Path(__file__).resolve().parent.parent


def shipped_folder(name: str) -> Path:
    """Find a folder that is shipped with the program.

    Parameters
    ----------
    name : str
        ``"templates"`` or ``"demo_runs"``.

    Returns
    -------
    Path
        ``hdetermine/_shipped/<name>`` of an installed package; the top-level folder of a
        checkout or an editable install.

    Raises
    ------
    InputError
        If it is in neither place.
    """
    # The installed place first: beside an installed package lie the folders of strangers.
    for folder in (PACKAGE / "_shipped" / name, PACKAGE.parent / name):
        if folder.is_dir():
            return folder
    raise InputError(
        f'The folder "{name}" that belongs to the program is missing; install hdetermine again.'
    )
