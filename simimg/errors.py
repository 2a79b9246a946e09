"""What can go wrong, sorted by whose mend it is.

`InputError` is for what a user can put right (a scene, a frame, an option): the command line prints
its lines and exits with 2. `RunError` is for what failed while running (a full disk, say): exit 1.
"""

from __future__ import annotations


class SimimgError(Exception):
    """Any failure that simimg reports in its own words; carries an exit code.

    Parameters
    ----------
    *lines : str
        One for each mistake.

    Attributes
    ----------
    lines : tuple of str
    exit_code : int
        Of a command that fails so.
    """

    exit_code = 1

    def __init__(self, *lines: str) -> None:
        self.lines: tuple[str, ...] = lines
        super().__init__("\n".join(lines))


class InputError(SimimgError):
    """Wrong input: one line for each mistake, each with its mend.

    Attributes
    ----------
    lines : tuple of str
        As ``FILE: key: what is wrong; what to write instead``.
    exit_code : int
        2.
    """

    exit_code = 2


class RunError(SimimgError):
    """Something failed while running; no input would have been right.

    Attributes
    ----------
    lines : tuple of str
        What failed.
    exit_code : int
        1.
    """

    exit_code = 1


def mistake(where: str, key: str, what: str, mend: str = "") -> str:
    """One mistake as one line, ``WHERE: key: what; mend``.

    Parameters
    ----------
    where : str
        File (or option) in which the mistake stands.
    key : str
        Dotted key, column or keyword; may be empty when the whole file is meant.
    what : str
        What is wrong.
    mend : str, optional
        What to write instead.

    Returns
    -------
    str
    """
    head = f"{where}: {key}: " if key else f"{where}: "
    line = f"{head}{what}; {mend}" if mend else f"{head}{what}"
    return " ".join(line.split())
