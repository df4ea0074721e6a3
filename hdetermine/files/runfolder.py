"""A run folder: its files are read here, and nothing outside it."""

from __future__ import annotations

import difflib
import hashlib
import os
import stat
from dataclasses import dataclass, field
from pathlib import Path

from hdetermine.errors import InputError
from hdetermine.files.limits import MAX_RUN_BYTES, check_limit
from hdetermine.files.plaintext import quoted
from hdetermine.records.run import InputFile

_NEAR_NAMES = 500
"""Names of a folder among which a misspelt one is looked for."""


def read_bytes(path: Path, where: str, limit: int) -> bytes:
    """Read a regular file of limited size.

    Parameters
    ----------
    path : Path
        The file.
    where : str
        Its name in messages.
    limit : int
        Largest size, bytes.

    Raises
    ------
    InputError
        If it is missing, not a regular file, not readable, empty or too large.
    """
    try:
        status = path.stat()
        if stat.S_ISDIR(status.st_mode):
            raise InputError(f"{where}: this is a folder; name a file.")
        if not stat.S_ISREG(status.st_mode):
            raise InputError(f"{where}: this is not an ordinary file; name one.")
        with path.open("rb") as stream:
            data = stream.read(limit + 1)
    except FileNotFoundError:
        raise InputError(f"{where}: there is no such file{_near_file(path)}.") from None
    except (OSError, ValueError) as error:
        reason = error.strerror if isinstance(error, OSError) and error.strerror else "bad name"
        raise InputError(f"{where}: it cannot be read ({reason.lower()}); check it.") from None
    if len(data) > limit:
        raise InputError(
            f"{where}: it is larger than the {limit / 1e6:.3g} MB that are read; split or "
            "shorten it."
        )
    if not data.strip():
        raise InputError(f"{where}: the file is empty; put the data into it or leave it out.")
    return data


def _near_file(path: Path) -> str:
    try:
        names = sorted(entry.name[:80] for entry in path.parent.iterdir())[:_NEAR_NAMES]
    except (OSError, ValueError):
        return ""
    close = difflib.get_close_matches(path.name[:80], names, n=1, cutoff=0.6)
    return f" (did you mean {quoted(close[0])}?)" if close else ""


def output_folder(folder: Path, name: str) -> Path:
    """Where outputs go if nobody names a place: a sub-folder of the input's folder.

    Parameters
    ----------
    folder : Path
        Folder of the input.
    name : str
        Name of the sub-folder.

    Raises
    ------
    InputError
        If it is a link that leads out of the folder: whoever made the folder did not ask us.
    """
    target = folder / name
    if not Path(os.path.realpath(target)).is_relative_to(os.path.realpath(folder)):
        raise InputError(
            f"{quoted(name)} in {quoted(folder)} is a link that leads out of the folder; remove "
            "it, or name a folder for the output with -o."
        )
    return target


@dataclass
class RunFolder:
    """The folder of a run, and a record of what was read from it.

    Attributes
    ----------
    path : Path
        The folder.
    files : dict of str to InputFile
        Files read so far, by name.
    size : int
        Bytes read so far.
    """

    path: Path
    files: dict[str, InputFile] = field(default_factory=dict)
    size: int = 0

    def locate(self, name: str, key: str, where: str) -> Path:
        """Find a file of the folder by its relative name.

        Parameters
        ----------
        name : str
            As written in the run sheet.
        key, where : str
            Key and run sheet that name it, for messages.

        Raises
        ------
        InputError
            If the name leads out of the folder, by itself or through a symbolic link.
        """
        relative = name.replace("\\", "/")
        parts = relative.split("/")
        if relative.startswith("/") or ".." in parts or ":" in parts[0] or "\0" in name:
            raise InputError(
                f"{where}: key {key}: found {quoted(name)}; allowed is the name of a file inside "
                "the run folder."
            )
        path = self.path / relative
        try:
            inside = Path(os.path.realpath(path)).is_relative_to(os.path.realpath(self.path))
        except (OSError, ValueError):
            inside = False
        if not inside:
            raise InputError(
                f"{where}: key {key}: {quoted(name)} is a link that leads out of the run folder; "
                "copy the file into it."
            )
        return path

    def read(self, path: Path, where: str, limit: int) -> bytes:
        """Read a file and note its checksum; arguments and errors as in `read_bytes`."""
        data = read_bytes(path, where, limit)
        self.size += len(data)
        check_limit(self.size, MAX_RUN_BYTES, where, "bytes in this and the files before it")
        self.files[where] = InputFile(where, hashlib.sha256(data).hexdigest())
        return data
