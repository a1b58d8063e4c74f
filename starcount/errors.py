"""Errors a user can act on: what was given, where, and what would work."""

from dataclasses import dataclass


class StarcountError(Exception):
    """The base of every error the command line reports in words instead of a traceback."""

    exit_status = 2


class InputError(StarcountError):
    """Something the user gave cannot be used; the message is one line."""


class UnknownName(InputError):
    """A name is not in one of our tables: (kind, name, known names)."""

    def __str__(self) -> str:
        kind, name, known = self.args
        return f"no {kind} called {name!r}; known: {', '.join(sorted(map(str, known)))}"


@dataclass(frozen=True)
class Problem:
    """One thing wrong with an input file: where it stands, what was found, what is allowed."""

    file: str
    where: str
    found: str
    allowed: str

    def __str__(self) -> str:
        place = f"{self.file}: {self.where}" if self.where else self.file
        return f"{place}: {self.found}; expected {self.allowed}"


class Problems(InputError):
    """Everything that is wrong with a set of input files, one ``Problem`` a line."""

    def __init__(self, *problems: Problem):
        super().__init__(*problems)

    def __str__(self) -> str:
        return "\n".join(map(str, self.args))


class FailedChecks(StarcountError):
    """The work was done, but its result did not pass its own checks."""

    exit_status = 6
