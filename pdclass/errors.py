"""One root error and a child for each exit code; every message is one line that a person can act on."""

from __future__ import annotations

from pathlib import Path


class PdclassError(Exception):
    """Something that the user should read as one line, ending the program with `exit_code`."""

    exit_code = 1


class InputError(PdclassError):
    """Usage, or an input that cannot be read (exit code 2)."""

    exit_code = 2


class RefusedError(PdclassError):
    """A bundle or file that is not safe or not intact (exit code 3)."""

    exit_code = 3


class TooFewError(PdclassError):
    """Not enough labels or groups to do it honestly (exit code 4)."""

    exit_code = 4


class MissingPartError(PdclassError):
    """An optional part of the installation is missing (exit code 5); the message names the extra."""

    exit_code = 5


class SkippedInputsError(PdclassError):
    """The work is done, but some inputs were skipped (exit code 6)."""

    exit_code = 6


def complaint(where: str | Path, field: str, *, expected: object, found: object, advice: str) -> str:
    """One line that says which file, which field, what was expected and found, and what to do."""
    line = f"{where}: {field}: expected {expected}, found {found}; {advice}"
    return " ".join(line.split())
