"""The few exceptions that a caller can catch, and the shape of an input problem."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, order=True)
class Problem:
    """One thing wrong with what the user wrote, placed where it stands.

    `file` is the path as the user would type it, `line` counts from 1 (0: the file as a whole),
    `text` says what is wrong and what was expected.
    """

    file: str
    line: int
    text: str

    def __str__(self) -> str:
        place = f"{self.file}:{self.line}" if self.line else self.file
        return f"{place}: {self.text}"


class TrainoptError(Exception):
    """Base of every error that trainopt raises on purpose."""


class InputError(TrainoptError):
    """What the user wrote is wrong; carries every problem found, sorted by file and line."""

    def __init__(self, problems: list[Problem] | tuple[Problem, ...]) -> None:
        self.problems: tuple[Problem, ...] = tuple(sorted(set(problems)))
        super().__init__("\n".join(str(problem) for problem in self.problems))


class DefectError(TrainoptError):
    """The program contradicts itself (a design failed its independent re-check): never the user's fault."""
