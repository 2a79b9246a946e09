"""A file that is there whole or not at all.

Every product is written under a temporary name in the folder it belongs to, flushed to the disk
and renamed; whatever goes wrong before the renaming, an interrupt included, removes it.
"""

from __future__ import annotations

import os
import secrets
import stat
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import BinaryIO

from simimg.errors import InputError, RunError, mistake


def check_new_file(path: str | os.PathLike[str], *, overwrite: bool = False) -> list[str]:
    """What forbids writing this file, before any work is spent on it.

    Parameters
    ----------
    path : path
        The file to be written.
    overwrite : bool
        Whether a file of that name may be replaced.

    Returns
    -------
    list of str
        One line for each mistake; empty when the file can be written.
    """
    shown = os.fspath(path)
    if not shown or "\0" in shown:
        return [mistake("output", "", "is not a file name", "name the file to write")]
    target = Path(os.path.realpath(shown))
    try:
        mode = target.stat().st_mode
    except (FileNotFoundError, NotADirectoryError):
        if target.parent.is_dir():
            return []
        folder = os.path.dirname(shown) or "."
        return [mistake(shown, "", f"folder {folder!r} does not exist", "make the folder first")]
    except OSError as error:
        reason = error.strerror or "not a usable file name"
        return [mistake(shown, "", f"cannot be written: {reason}", "choose another name")]
    if stat.S_ISDIR(mode):
        return [mistake(shown, "", "is a folder", "name a file in it")]
    if not stat.S_ISREG(mode):
        return [mistake(shown, "", "is not an ordinary file", "choose another name")]
    if not overwrite:
        mend = "choose another name, or allow it with --overwrite (overwrite=True)"
        return [mistake(shown, "", "exists already", mend)]
    return []


@contextmanager
def new_file(path: str | os.PathLike[str], *, overwrite: bool = False) -> Iterator[BinaryIO]:
    """Open a file for writing bytes that appears under its name only when all is written.

    Parameters
    ----------
    path : path
        The file to be written. A symbolic link is followed.
    overwrite : bool
        Whether a file of that name may be replaced.

    Yields
    ------
    binary file
        Readable, writable and seekable.

    Raises
    ------
    InputError
        The name cannot be used, or the file exists and `overwrite` is false.
    RunError
        The system refused (a full disk, say); nothing is left behind.
    """
    mistakes = check_new_file(path, overwrite=overwrite)
    if mistakes:
        raise InputError(*mistakes)
    shown = os.fspath(path)
    target = os.path.realpath(shown)
    # The temporary name does not repeat the target's, which may be as long as a name can be.
    temporary = os.path.join(os.path.dirname(target), f".simimg-{secrets.token_hex(8)}.part")
    try:
        with open(temporary, "x+b") as handle:
            yield handle
            handle.flush()
            os.fsync(handle.fileno())
        if not overwrite and os.path.lexists(target):
            raise InputError(*check_new_file(path))
        os.replace(temporary, target)
    except OSError as error:
        _remove(temporary)
        reason = error.strerror or str(error)
        raise RunError(mistake(shown, "", f"could not be written: {reason}")) from error
    except BaseException:
        _remove(temporary)
        raise


def _remove(path: str) -> None:
    with suppress(OSError):
        os.unlink(path)
