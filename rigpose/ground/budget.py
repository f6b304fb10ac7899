"""How much work one call may do, and how it reports and stops."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

Watch = Callable[[str, int, int], object]
"""Called between blocks of work with (what, done, total); a false answer other than None stops."""


@dataclass(frozen=True, slots=True)
class Budget:
    """Limits of one call.

    poses : how many poses a held set may have
    seconds : wall time after which a search for branches of one frame returns what it has
    bytes : memory for the arrays of one block of branches
    """

    poses: int = 4096
    seconds: float = float("inf")
    bytes: int = 1 << 28


def go_on(watch: Watch | None, what: str, done: int, total: int) -> bool:
    """Whether the caller wants the work to go on (``None`` from the watch means yes)."""
    if watch is None:
        return True
    answer = watch(what, done, total)
    return answer is None or bool(answer)
