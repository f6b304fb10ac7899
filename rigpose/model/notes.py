"""Collects what is wrong with a document, so that all of it is told at once."""

from __future__ import annotations

from collections.abc import Callable, Collection, Iterable
from functools import partial
from itertools import islice

from rigpose.ground.errors import MOST_PROBLEMS, BadInput, Problem
from rigpose.model.names import KeyPath, meant, path_text, shown

Where = Callable[[KeyPath], str]
"""Tells the file, and the line where it can be had, of a key path."""


class Notes:
    """Problems found so far.

    A problem becomes text only when it is told: a rig of 100,000 joints may have as many
    problems, and finding lines and nearest names for more than the first few is wasted.
    """

    def __init__(self, where: Where) -> None:
        self._where = where
        self._found: list[Callable[[], Problem]] = []

    def __len__(self) -> int:
        return len(self._found)

    def add(self, path: KeyPath, rule: str, got: str = "", mend: str = "") -> None:
        """Note one problem of the value at ``path``."""
        self._found.append(partial(self._problem, path, rule, got, mend))

    def unknown(self, path: KeyPath, kind: str, name: str, known: Collection[str]) -> None:
        """Note a name (of a joint, key, bone, ...) that isn't among the known ones."""
        self._found.append(partial(self._unknown, path, kind, name, known))

    def refused(self, path: KeyPath, bad: BadInput) -> None:
        """Note what a reader of one value refused, and where that value stands."""
        for problem in bad.problems:
            self.add(path, problem.rule, problem.got, problem.mend)

    def take(self, problems: Iterable[Problem]) -> None:
        """Note problems that are already complete, of another file."""
        self._found.extend(partial(_itself, p) for p in problems)

    def stop_if_any(self) -> None:
        """Raise BadInput with everything noted so far, if there is anything."""
        if not self._found:
            return
        told = [make() for make in islice(self._found, MOST_PROBLEMS)]
        rest = len(self._found) - len(told)
        raise BadInput([*told, *[Problem("", "", "further problems")] * rest])

    def _problem(self, path: KeyPath, rule: str, got: str, mend: str) -> Problem:
        return Problem(self._where(path), path_text(path), rule, got, mend)

    def _unknown(self, path: KeyPath, kind: str, name: str, known: Collection[str]) -> Problem:
        mend = meant(name, known)
        return self._problem(path, f"there is no {kind} of this name", shown(name), mend)


def _itself(problem: Problem) -> Problem:
    return problem
