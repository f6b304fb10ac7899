"""Numbers and names in sentences."""

from __future__ import annotations

from collections.abc import Sequence
from math import log10

SEVERAL = 8


def count(n: int, what: str) -> str:
    """How many, in words.

    >>> count(1, "joint"), count(3, "joint")
    ('1 joint', '3 joints')
    """
    return f"{n} {what}" if n == 1 else f"{large(n)} {what}s"


def large(n: int) -> str:
    """A whole number, in powers of ten where nobody would read its digits.

    >>> large(4096), large(2**96)
    ('4096', '8e28')
    """
    if n < 10**7:
        return str(n)
    power = int(n.bit_length() * log10(2))  # str() refuses more than some thousand digits
    power -= 10**power > n
    return f"{-(-n // 10**power)}e{power}"


def amount(value: float, digits: int = 3) -> str:
    """A number with few digits.

    >>> amount(0.000012345), amount(5.0), amount(1.0000005, 8)
    ('1.23e-05', '5', '1.0000005')
    """
    return f"{value:.{digits}g}"


def listed(names: Sequence[str], most: int = SEVERAL) -> str:
    """Names with commas, the first few of many.

    >>> listed(["a", "b", "c"]), listed(["a", "b", "c"], 2)
    ('a, b, c', 'a, b and 1 more')
    """
    text = ", ".join(names[:most])
    return text if len(names) <= most else f"{text} and {len(names) - most} more"
