"""The errors a user can meet: each says what, where, what was found, what is allowed and how to mend it."""

from __future__ import annotations

from dataclasses import dataclass


class RulecheckError(Exception):
    """Root of all errors of this package; raised only through its leaves.

    Parameters
    ----------
    message : str
        What is wrong, with what was found and what is allowed.
    hint : str
        How to mend it, or empty.
    """

    def __init__(self, message: str, hint: str = "") -> None:
        super().__init__(message)
        self.message = message
        self.hint = hint

    def __str__(self) -> str:
        return f"{self.message} ({self.hint})" if self.hint else self.message


class QuantityError(RulecheckError):
    """A quantity cannot be read: no unit, a wrong dimension, an unknown prefix, not finite."""


class LawError(RulecheckError):
    """A law cannot be read, or its dimensions do not agree."""


class CommandError(RulecheckError):
    """The command cannot be carried out as given (exit status 2)."""


class EditError(RulecheckError):
    """An edit does not fit the file it is meant for."""


class AnalysisError(RulecheckError):
    """An analysis cannot give its figures; reported as a failure, never passed over."""


class PluginError(RulecheckError):
    """A plugin cannot be loaded or breaks the contract of a rule."""


@dataclass(frozen=True, slots=True)
class Problem:
    """One fault of an input file, with its place.

    Line and column count from 1 and are those of the file's text; None where no place is known.
    """

    file: str
    key: str
    message: str
    line: int | None = None
    column: int | None = None

    def __str__(self) -> str:
        place = ":".join(str(x) for x in (self.file, self.line, self.column) if x is not None)
        return f"{place}: {self.key}: {self.message}" if self.key else f"{place}: {self.message}"


class DesignError(RulecheckError):
    """A design file cannot be used; holds every problem found, in the order of the file.

    Parameters
    ----------
    problems : sequence of Problem
        At least one.
    """

    def __init__(self, problems: list[Problem] | tuple[Problem, ...]) -> None:
        self.problems = tuple(problems)
        super().__init__("\n".join(str(problem) for problem in self.problems))
