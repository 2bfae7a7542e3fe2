"""The three ways pairmc says no.

Each error carries its parts as attributes and survives pickling, so that it can cross from a worker
to the process that prints it.
"""

from __future__ import annotations

from dataclasses import dataclass


class PairmcError(Exception):
    """Everything pairmc raises on purpose; `exit_code` is what the command line returns."""

    exit_code = 1


@dataclass(frozen=True)
class Problem:
    """One thing that is wrong with the input: what, got, allowed, do.

    Parameters
    ----------
    key
        What is wrong, in the user's own words: ``[gas] total_density``, ``--into``, or a file name.
    got
        What was given, as text.
    allowed
        What is allowed there.
    advice
        What to do about it.
    line
        Line of the file the problem stands on, or None.
    """

    key: str
    got: str
    allowed: str = ""
    advice: str = ""
    line: int | None = None

    def text(self, path: str | None = None) -> str:
        """Return the problem as one readable line, `path` and line number in front."""
        place = "" if path is None else path
        if path is not None and self.line is not None:
            place += f":{self.line}"
        head = f"{place}: {self.key}" if place else self.key
        sentence = f"{head}: got {self.got}" if self.got else head
        if self.allowed:
            sentence += f"; allowed: {self.allowed}"
        if self.advice:
            sentence += f"; {self.advice}"
        return sentence


class InputError(PairmcError):
    """Input was refused; nothing was begun and nothing was written.

    Parameters
    ----------
    problems
        One or more problems, all that were found.
    path
        The file they were found in, or None.
    """

    exit_code = 2

    def __init__(self, problems: Problem | tuple[Problem, ...], path: str | None = None) -> None:
        self.problems = (problems,) if isinstance(problems, Problem) else tuple(problems)
        self.path = path
        super().__init__(self.problems, path)

    def __str__(self) -> str:
        return "\n".join(problem.text(self.path) for problem in self.problems)


class BatchError(PairmcError):
    """A batch failed while it was being sampled.

    Parameters
    ----------
    number
        Which batch.
    reason
        Why, in one sentence.
    """

    def __init__(self, number: int, reason: str) -> None:
        self.number = number
        self.reason = reason
        super().__init__(number, reason)

    def __str__(self) -> str:
        return f"batch {self.number} failed: {self.reason}"


class ResultFileError(InputError):
    """A result file cannot be read: missing, damaged, of a newer schema, or not one of ours."""
