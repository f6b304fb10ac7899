"""The numbers that decide, each with its meaning; passed in, never global state."""

from __future__ import annotations

from dataclasses import dataclass

EPS = 2.220446049250313e-16


@dataclass(frozen=True, slots=True)
class Tolerances:
    """All as fractions of the rig's size.

    slack : how far numbers of the file may disagree (redundant lengths, plates)
    close : a target is met when its miss is not more
    hold : how far a length may be off in a returned pose, in the rig's own frame
    rounding : one placing's rounding: 4 units of float64 (METHODS: error bounds)
    careful : squared heights below this are looked at again with carried error bounds
    rank : a singular value below is zero, if ten times slack is not larger
    """

    slack: float = 1e-6
    close: float = 1e-6
    hold: float = 1e-12
    rounding: float = 4 * EPS
    careful: float = 1e-7
    rank: float = 1e-9

    @property
    def zero(self) -> float:
        """Below this a singular value counts as zero."""
        return max(self.rank, 10 * self.slack)
