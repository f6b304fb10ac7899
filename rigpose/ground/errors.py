"""What can be wrong, said so that it can be mended."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

MOST_PROBLEMS = 20


@dataclass(frozen=True, slots=True)
class Problem:
    """One thing that is wrong or worth knowing.

    ``where`` is the file with its line or key path, ``part`` the joint or bone, ``rule`` what
    holds, ``got`` what came instead, ``mend`` one way out, ``worth`` an amount for sorting.
    """

    where: str
    part: str
    rule: str
    got: str = ""
    mend: str = ""
    worth: float = 0.0

    def __str__(self) -> str:
        head = ": ".join(x for x in (self.where, self.part) if x)
        text = f"{head}: {self.rule}" if head else self.rule
        if self.got:
            text += f"; got {self.got}"
        return f"{text}; {self.mend}" if self.mend else text


class RigposeError(Exception):
    """Root of everything that rigpose raises on purpose."""


class BadInput(RigposeError, ValueError):  # noqa: N818 - the public name says what it is
    """Wrong input, with all problems found (at most 20 are kept)."""

    def __init__(self, problems: Iterable[Problem] | Problem | str) -> None:
        if isinstance(problems, str):
            problems = Problem("", "", problems)
        found = (problems,) if isinstance(problems, Problem) else tuple(problems)
        self.problems: tuple[Problem, ...] = found[:MOST_PROBLEMS]
        self.left_out = len(found) - len(self.problems)
        super().__init__(found)

    def __str__(self) -> str:
        lines = [str(p) for p in self.problems]
        if self.left_out:
            lines.append(f"and {self.left_out} more")
        return "\n".join(lines)

    def __reduce__(self) -> tuple[type[BadInput], tuple[tuple[Problem, ...]]]:
        return BadInput, (self.problems,)


class Unsolvable(RigposeError, RuntimeError):  # noqa: N818
    """Raised only on request (``strict=True``): the rig or the wish cannot be met."""
