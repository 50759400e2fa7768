"""Errors and the places they point at.

Exceptions are for misuse (a wrong shape, an unknown name, a broken file). What a check could not decide is a value,
`Outcome`, and never an exception. Mistakes in a spec are collected as `Problem`s and raised together.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass


@dataclass(frozen=True, slots=True, order=True)
class Place:
    """A spot in a file; line and column count from 1."""

    file: str
    line: int = 1
    column: int = 1

    def __str__(self) -> str:
        return f"{self.file}:{self.line}:{self.column}"


@dataclass(frozen=True, slots=True, order=True)
class Problem:
    """One mistake in an input file: where, what is wrong, what was expected, the nearest right word."""

    place: Place
    wrong: str
    expected: str = ""
    hint: str = ""

    def __str__(self) -> str:
        parts = [self.wrong, self.expected, f"did you mean {self.hint!r}?" if self.hint else ""]
        return f"{self.place}: " + "; ".join(part for part in parts if part)


class LinverifyError(Exception):
    """Root of every error that linverify raises on purpose."""


class SpecError(LinverifyError):
    """One or more mistakes in a spec or in a file that it names; all of them, sorted by place."""

    def __init__(self, problems: Sequence[Problem]) -> None:
        self.problems = tuple(sorted(set(problems)))
        super().__init__("\n".join(str(problem) for problem in self.problems))


class DefinitionError(LinverifyError, ValueError):
    """A `Plant` was described with arguments that do not fit together."""


class PlantError(LinverifyError):
    """A plant function misbehaved when it was called; the message names the call and its arguments."""


class UnsolvedError(PlantError):
    """An algebraic loop around a plant has no solution that was found; the message names the loop."""


class DriveFileError(LinverifyError):
    """A saved drive cannot be read, or does not belong to the plant or point it is replayed on."""


class RecordError(LinverifyError):
    """A record cannot be written or read back."""
