"""Numbers written as ordinary arithmetic: + - * / and brackets over numbers and sizes.

A parser of our own over a handful of tokens: nothing is evaluated by Python, there are no names
of functions, and both the length of a text and the nesting of its brackets are bounded.
"""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass

from rigpose.ground.errors import BadInput, Problem
from rigpose.model.names import meant, shown

LONGEST_TEXT = 1000
DEEPEST = 50

_TOKEN = re.compile(
    r"\s*(?:(?P<number>(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)"
    r"|(?P<name>[^\W\d]\w*)|(?P<sign>[-+*/()]))"
)


@dataclass(frozen=True, slots=True)
class _Token:
    kind: str
    text: str


_END = _Token("end", "")


def read_number(value: object, sizes: Mapping[str, float]) -> float:
    """A finite number from what a file has: a number, or arithmetic over ``sizes``.

    Returns NaN only where a size used is NaN, which stands for one already refused.
    Raises BadInput, its problem without place or part, for anything else.

    >>> read_number("2 * (reach - 0.5)", {"reach": 3.0})
    5.0
    """
    if isinstance(value, str):
        return evaluate(value, sizes)
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise _bad("must be a number or arithmetic", shown(value), 'write 1.5 or "2 * reach"')
    try:
        number = float(value)
    except OverflowError:
        number = math.inf
    if not math.isfinite(number):
        raise _bad("must be a finite number", shown(value), "write an ordinary number")
    return number


def evaluate(text: str, sizes: Mapping[str, float]) -> float:
    """The value of an arithmetic text; see `read_number` for NaN. Raises BadInput.

    >>> evaluate("-3 + 6 / 4", {})
    -1.5
    """
    value = _Parser(text, sizes).whole()
    if not math.isfinite(value) and not _uses_refused(text, sizes):
        raise _bad("the value of the arithmetic is too large", shown(text), "use smaller numbers")
    return value if math.isfinite(value) else math.nan


def names_in(text: str) -> tuple[str, ...]:
    """The sizes that a text uses, each once, in order. Raises BadInput for a bad text."""
    return tuple(dict.fromkeys(t.text for t in _tokens(text) if t.kind == "name"))


def _uses_refused(text: str, sizes: Mapping[str, float]) -> bool:
    return any(math.isnan(sizes[n]) for n in names_in(text))


def _bad(rule: str, got: str, mend: str) -> BadInput:
    return BadInput(Problem("", "", rule, got, mend))


def _tokens(text: str) -> list[_Token]:
    if len(text) > LONGEST_TEXT:
        rule = f"arithmetic has at most {LONGEST_TEXT} characters"
        raise _bad(rule, f"{len(text)} characters", "split it over several [sizes]")
    found: list[_Token] = []
    at, end = 0, len(text.rstrip())
    while at < end:
        match = _TOKEN.match(text, at, end)
        if match is None:
            sign = text[at:].lstrip()[0]
            mend = f"take out {shown(sign)}"
            raise _bad("arithmetic has only numbers, sizes, + - * / and brackets",
                       shown(text), mend)
        found.append(_Token(match.lastgroup or "", match[match.lastgroup or 0]))
        at = match.end()
    return found


class _Parser:
    """Recursive descent: a sum of products of signed numbers, sizes and brackets."""

    def __init__(self, text: str, sizes: Mapping[str, float]) -> None:
        self.text = text
        self.sizes = sizes
        self.tokens = _tokens(text)
        self.at = 0
        self.depth = 0

    def whole(self) -> float:
        value = self.sum()
        if self.peek() is not _END:
            raise self.unexpected()
        return value

    def peek(self) -> _Token:
        return self.tokens[self.at] if self.at < len(self.tokens) else _END

    def next_sign(self, signs: str) -> str:
        token = self.peek()
        if token.kind != "sign" or token.text not in signs:
            return ""
        self.at += 1
        return token.text

    def sum(self) -> float:
        value = self.product()
        while sign := self.next_sign("+-"):
            term = self.product()
            value = value + term if sign == "+" else value - term
        return value

    def product(self) -> float:
        value = self.signed()
        while sign := self.next_sign("*/"):
            factor = self.signed()
            if sign == "/" and factor == 0:
                raise _bad("arithmetic divides by zero", shown(self.text), "mend the divisor")
            value = value * factor if sign == "*" else value / factor
        return value

    def signed(self) -> float:
        factor = 1.0
        while sign := self.next_sign("+-"):
            factor = -factor if sign == "-" else factor
        return factor * self.atom()

    def atom(self) -> float:
        token = self.peek()
        if token.kind == "number":
            self.at += 1
            return float(token.text)
        if token.kind == "name":
            self.at += 1
            return self.size(token.text)
        if self.next_sign("("):
            return self.bracket()
        raise self.unexpected()

    def size(self, name: str) -> float:
        if name in self.sizes:
            return self.sizes[name]
        rule = f"there is no size {shown(name)} in [sizes]"
        raise _bad(rule, shown(self.text), meant(name, self.sizes))

    def bracket(self) -> float:
        self.depth += 1
        if self.depth > DEEPEST:
            rule = f"arithmetic has at most {DEEPEST} brackets inside one another"
            raise _bad(rule, shown(self.text), "split it over several [sizes]")
        value = self.sum()
        if not self.next_sign(")"):
            raise self.unexpected()
        self.depth -= 1
        return value

    def unexpected(self) -> BadInput:
        token = self.peek()
        if token is not _END:
            rule = f"{shown(token.text)} cannot stand there"
            mend = "a sign + - * / is missing before it, or something else too many"
            return _bad(rule, shown(self.text), mend)
        rule = "the arithmetic ends too early"
        open_end = not self.tokens or self.tokens[-1].text in tuple("+-*/(")
        mend = "a number or size is missing at its end" if open_end else "close the bracket"
        return _bad(rule, shown(self.text), mend)
