"""Writing a set of outputs into a folder, all or nothing.

Several files cannot be replaced by one step of a file system, so the set is written twice over:

1. under a lock, every file goes into a hidden sub-folder ``.hdetermine-staged`` with a list of
   where each belongs, and all of it is forced to the disk;
2. that sub-folder is renamed to ``.hdetermine-ready``. This one step is the commit: before it
   the earlier outputs stand whole, after it the new ones do;
3. each file is moved to its place, and the empty sub-folder is removed.

A process that is killed before the commit leaves the earlier outputs and a staged folder that
the next run clears. One that is killed after it leaves a ready folder, and the next run first
finishes those moves. SIGINT and SIGTERM are looked at between files: before the commit they
clear up and end the work, after it they wait until the set stands. A sub-folder of the outputs'
own, not a swap of whole folders, because the folder may hold files of other people, and may be
the working directory of a shell. Files of other names are never touched.
"""

from __future__ import annotations

import errno
import fcntl
import json
import os
import shutil
import time
from collections.abc import Collection, Iterable, Iterator, Mapping
from contextlib import contextmanager, suppress
from pathlib import Path, PurePosixPath

from hdetermine.errors import InputError
from hdetermine.files.interruption import Interruption, held_signals

STAGED = ".hdetermine-staged"
READY = ".hdetermine-ready"
LOCK = ".hdetermine-lock"
LIST = "list.json"
WAIT_FOR_LOCK_s = 10.0
POLL_s = 0.05


def write_outputs(
    folder: str | Path, outputs: Mapping[str, bytes], *, retired: Collection[str] = ()
) -> None:
    """Write files into a folder so that they are the old set or the new set, whole.

    Parameters
    ----------
    folder : path
        Made if it is not there.
    outputs : mapping of str to bytes
        Contents by name; a name may have sub-folders (``groups/a.html``).
    retired : collection of str
        Names of an earlier set that are removed if they are not in this one.

    Raises
    ------
    InputError
        If the folder cannot be written, its disk is full, or another process keeps writing to
        it; the earlier files then stand as they were.
    KeyboardInterrupt
        If SIGINT or SIGTERM came before the commit; nothing stray is left. One that came after
        it is handed on to its own handler when the new set stands.
    """
    target = Path(folder)
    for name in (*outputs, *retired):
        _checked(name)
    gone = sorted(set(retired) - set(outputs))
    with (
        held_signals() as interrupted,
        _sentences(target),
        _made_folder(target),
        _lock(target, interrupted),
    ):
        _finish(target)
        _refuse_obstacles(target, outputs, gone)
        try:
            _stage(target, outputs, gone, interrupted)
            interrupted.raise_if_set()
            os.rename(target / STAGED, target / READY)
        finally:
            _clear(target / STAGED)
        _sync_folder(target)
        _finish(target)


@contextmanager
def _sentences(target: Path) -> Iterator[None]:
    """Turn what an operating system reports into one sentence."""
    try:
        yield
    except OSError as error:
        if error.errno in (errno.ENOSPC, errno.EDQUOT, errno.EFBIG):
            raise InputError(
                f"The disk of the output folder {target} is full: the earlier files are as they "
                "were; free some space, or choose another folder with -o."
            ) from error
        if error.errno in (errno.ENOTDIR, errno.EEXIST):
            raise InputError(
                f"The output folder {target} is not a folder: choose another one with -o."
            ) from error
        raise InputError(
            f"The output folder {target} cannot be written to ({error.strerror}): choose another "
            "one with -o."
        ) from error


def _checked(name: str) -> PurePosixPath:
    path = PurePosixPath(name)
    if (
        not path.name
        or path.is_absolute()
        or ".." in path.parts
        or path.parts[0] in (STAGED, READY, LOCK)
        or "\0" in name
    ):
        raise InputError(f"{name!r} cannot be the name of an output: it must stay in its folder.")
    return path


@contextmanager
def _made_folder(target: Path) -> Iterator[None]:
    """Make the folder; what was made and stays empty goes again."""
    missing = []
    path = target
    while not path.exists() and not path.is_symlink():
        missing.append(path)
        path = path.parent
    try:
        target.mkdir(parents=True, exist_ok=True)
        yield
    finally:
        for path in missing:
            with suppress(OSError):
                path.rmdir()


@contextmanager
def _lock(target: Path, interrupted: Interruption) -> Iterator[None]:
    """Hold the folder's lock file; it vanishes with the lock."""
    path = target / LOCK
    deadline = time.monotonic() + WAIT_FOR_LOCK_s
    while True:
        descriptor = os.open(path, os.O_RDWR | os.O_CREAT | os.O_CLOEXEC | os.O_NOFOLLOW, 0o600)
        try:
            fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
            if _is_same_file(descriptor, path):
                break
        except BlockingIOError:
            pass
        except BaseException:
            os.close(descriptor)
            raise
        os.close(descriptor)
        interrupted.raise_if_set()
        if time.monotonic() > deadline:
            raise InputError(
                f"Another hdetermine is writing to the output folder {target}: wait until it has "
                "finished, or choose another folder with -o."
            )
        time.sleep(POLL_s)
    try:
        yield
    finally:
        path.unlink(missing_ok=True)
        os.close(descriptor)


def _is_same_file(descriptor: int, path: Path) -> bool:
    """Whether the locked file still is the one of that name: its last holder removed it."""
    try:
        there = path.lstat()
    except FileNotFoundError:
        return False
    here = os.fstat(descriptor)
    return (here.st_dev, here.st_ino) == (there.st_dev, there.st_ino)


def _stage(
    target: Path, outputs: Mapping[str, bytes], retired: list[str], interrupted: Interruption
) -> None:
    staged = target / STAGED
    staged.mkdir()
    names = sorted(outputs)
    for number, name in enumerate(names):
        interrupted.raise_if_set()
        _write(staged / str(number), outputs[name])
    _write(staged / LIST, json.dumps({"names": names, "retired": retired}).encode())
    _sync_folder(staged)


def _write(path: Path, content: bytes) -> None:
    with path.open("wb") as stream:
        stream.write(content)
        stream.flush()
        os.fsync(stream.fileno())


def _sync_folder(path: Path) -> None:
    descriptor = os.open(path, os.O_RDONLY | os.O_DIRECTORY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)


def _refuse_obstacles(target: Path, names: Iterable[str], retired: Iterable[str]) -> None:
    """See before anything moves that every move will succeed, and stay inside the folder."""
    for name in (*names, *retired):
        for parent in list(_checked(name).parents)[:-1]:
            if _stands(target / parent) and not _is_folder(target / parent):
                raise InputError(
                    f"{target / parent} stands in the way of the outputs: it must be a folder."
                )
        if _is_folder(target / name):
            raise InputError(
                f"{target / name} stands in the way of an output of that name: it is a folder."
            )


def _stands(path: Path) -> bool:
    return path.exists() or path.is_symlink()


def _is_folder(path: Path) -> bool:
    """Whether this is a folder itself, not a link to one."""
    return path.is_dir() and not path.is_symlink()


def _clear(path: Path) -> None:
    """Remove a hidden thing of ours, whatever became of it."""
    if _is_folder(path):
        shutil.rmtree(path, ignore_errors=True)
    else:
        path.unlink(missing_ok=True)


def _finish(target: Path) -> None:
    """Clear a staged set that never was committed, and move a committed one to its places."""
    _clear(target / STAGED)
    ready = target / READY
    names, retired = _listed(ready)
    _refuse_obstacles(target, names, retired)
    for number, name in enumerate(names):
        if (ready / str(number)).exists():
            place = target / name
            try:
                place.parent.mkdir(parents=True, exist_ok=True)
                os.replace(ready / str(number), place)
            except OSError as error:
                raise InputError(
                    f"{place} cannot be replaced ({error.strerror}): the new outputs are ready "
                    "and the next run puts them in place, once it can."
                ) from error
    for name in retired:
        (target / name).unlink(missing_ok=True)
    _sync_folder(target)
    _clear(ready)


def _listed(ready: Path) -> tuple[list[str], list[str]]:
    """Names to place and to remove; none unless the folder is a committed set of ours."""
    if not _is_folder(ready):
        return [], []
    try:
        content = json.loads((ready / LIST).read_bytes())
        names, retired = list(content["names"]), list(content["retired"])
        for name in (*names, *retired):
            _checked(name)
    except (OSError, ValueError, KeyError, TypeError, InputError):
        return [], []
    return names, retired
