"""The states of a result, each with the sentence a person reads."""

from __future__ import annotations

from enum import Enum, IntEnum


class Found(Enum):
    """Describes a set of branches: is it all there is?"""

    COMPLETE = "complete"
    PROBABLY = "probably complete"
    SOME = "some"
    BUDGET = "stopped at a budget"
    STOPPED = "stopped by the caller"

    @property
    def whole(self) -> bool:
        """True where nothing was cut short."""
        return self in (Found.COMPLETE, Found.PROBABLY)


def weaker(a: Found, b: Found) -> Found:
    """The weaker of two claims."""
    order = list(Found)
    return order[max(order.index(a), order.index(b))]


class State(IntEnum):
    """Describes one cell (a branch at a frame)."""

    NONE = 0
    NEAR = 1
    MET = 2

    @property
    def text(self) -> str:
        """The sentence for people."""
        return {
            State.NONE: "does not assemble",
            State.NEAR: "assembles, but a target is missed",
            State.MET: "assembles and meets its targets",
        }[self]
