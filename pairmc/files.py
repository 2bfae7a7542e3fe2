"""Writing files whole or not at all."""

from __future__ import annotations

import os
from collections.abc import Callable, Collection
from pathlib import Path

from pairmc.errors import InputError, Problem

# Marks a file that is being written; what is left of one after a crash may be deleted.
TEMPORARY = ".unfinished-"


def refuse_unless_writable(path: Path) -> None:
    """Refuse a name under which no file can be written.

    Raises
    ------
    InputError
        Where it is a folder's, or its folder is missing or not writable.
    """
    folder = path.parent
    if path.is_dir():
        raise InputError(Problem(str(path), "a folder", "a file name", "add a file name to it"))
    if not folder.is_dir():
        got = f"folder {folder} does not exist"
        raise InputError(Problem(str(path), got, "", "make it, or name another"))
    if not os.access(folder, os.W_OK | os.X_OK):
        got = f"folder {folder} is not writable"
        raise InputError(Problem(str(path), got, "", "name another place"))


def known_suffix(path: Path, known: Collection[str], advice: str) -> str:
    """Return the suffix of a file's name, in lower case and without its dot.

    Parameters
    ----------
    path
        The file's name.
    known
        The suffixes that are allowed.
    advice
        What to say of them where another is refused.

    Raises
    ------
    InputError
        Where it is not among those known.
    """
    suffix = path.suffix.lower().removeprefix(".")
    if suffix not in known:
        allowed = ", ".join(f".{each}" for each in known)
        got = f'a name that ends in "{path.suffix}"' if path.suffix else "a name without a suffix"
        raise InputError(Problem(str(path), got, allowed, advice))
    return suffix


def write_whole(
    path: Path, write: Callable[[Path], None], check: Callable[[Path], None] = lambda path: None
) -> None:
    """Write a file under a temporary name, force it to the disk, and only then give it its name.

    A reader sees the old file or the new one, never a piece; after a crash or on a full disk the
    old file is still there.

    Parameters
    ----------
    path
        The file's name; replaced where it exists.
    write
        Writes the contents to the path it is given, in the same folder.
    check
        Reads them back from there and raises if they are not right; the old file then stays.

    Raises
    ------
    OSError
        Where the disk refuses; the temporary file is removed.
    """
    temporary = path.with_name(f".{path.name}{TEMPORARY}{os.getpid()}")
    try:
        write(temporary)
        with temporary.open("rb") as file:
            os.fsync(file.fileno())
        check(temporary)
        os.replace(temporary, path)
    except BaseException:
        temporary.unlink(missing_ok=True)
        raise
    sync_folder(path.parent)


def sync_folder(folder: Path) -> None:
    """Force a folder's list of names to the disk."""
    handle = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)


def remove_unfinished(folder: Path, name: str = "") -> None:
    """Delete what crashed writers left in a folder: of one file, or of all where none is named."""
    for leftover in folder.glob(f".{name}*{TEMPORARY}*"):
        leftover.unlink(missing_ok=True)
