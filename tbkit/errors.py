"""The exceptions of tbkit, one for each exit code above 1."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True, order=True)
class Problem:
    """One thing wrong in an input file."""

    file: str
    line: int
    text: str

    def __str__(self) -> str:
        return f"{self.file}:{self.line}: {self.text}"


class InputError(ValueError):
    """An input file or an option is wrong (exit code 2).

    Holds every problem found, so that a file is mended in one go.
    """

    def __init__(self, problems: list[Problem]) -> None:
        self.problems = tuple(sorted(problems))
        super().__init__("\n".join(str(problem) for problem in self.problems))


class UnfitError(ValueError):
    """A sound profile asks for something this decoder does not have; the text is the reason."""


class SimulatorError(RuntimeError):
    """The simulator is missing, would not build the design, or died (exit code 3)."""
