"""Arithmetic in rig files, measured against Python's own arithmetic on the same texts."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigpose.ground.errors import BadInput
from rigpose.model.arithmetic import DEEPEST, evaluate, names_in, read_number
from rigpose.model.make import make_rig
from rigpose.model.notes import Notes
from rigpose.model.sizes import resolve_sizes

NUMBERS = st.floats(0.01, 1000, allow_nan=False).map(repr)
SIZES = {"reach": 3.25, "höhe": 0.5, "_k2": 12.0}


def expressions() -> st.SearchStrategy[str]:
    """Texts that are proper arithmetic for us and for Python alike."""
    def larger(inner: st.SearchStrategy[str]) -> st.SearchStrategy[str]:
        two = st.tuples(inner, st.sampled_from(["+", "-", "*", " / ", " - "]), inner).map("".join)
        return two | inner.map(lambda t: f"({t})") | inner.map(lambda t: f"-{t}")

    return st.recursive(NUMBERS | st.sampled_from(list(SIZES)), larger, max_leaves=12)


@given(expressions())
def test_agrees_with_pythons_own_arithmetic(text: str) -> None:
    try:
        expected = float(eval(text, {"__builtins__": {}}, dict(SIZES)))
    except ZeroDivisionError:
        with pytest.raises(BadInput, match="arithmetic divides by zero"):
            evaluate(text, SIZES)
        return
    assert evaluate(text, SIZES) == expected


@pytest.mark.parametrize(("text", "value"), [
    ("1", 1.0), (" 2 + 3*4 ", 14.0), ("(2+3)*4", 20.0), ("8/4/2", 1.0), ("2-3-4", -5.0),
    ("--3", 3.0), ("-(1.5e1)", -15.0), (".5 + 5.", 5.5), ("+2 * -3", -6.0), ("1E-3", 0.001),
])
def test_usual_rules_of_precedence(text: str, value: float) -> None:
    assert evaluate(text, {}) == value


@pytest.mark.parametrize(("text", "message"), [
    ("", 'the arithmetic ends too early; got ""; a number or size is missing at its end'),
    ("1 +", 'the arithmetic ends too early; got "1 +"; a number or size is missing at its end'),
    ("(1 + 2", 'the arithmetic ends too early; got "(1 + 2"; close the bracket'),
    ("1 2", '"2" cannot stand there; got "1 2"; a sign + - * / is missing before it, or '
            "something else too many"),
    ("2 ** 3", '"*" cannot stand there; got "2 ** 3"; a sign + - * / is missing before it, or '
               "something else too many"),
    ("abs(1)", 'there is no size "abs" in [sizes]; got "abs(1)"; did you mean "absent"?'),
    ("reech", 'there is no size "reech" in [sizes]; got "reech"; did you mean "reach"?'),
    ("reach % 2", 'arithmetic has only numbers, sizes, + - * / and brackets; got "reach % 2"; '
                  'take out "%"'),
    ("1 / (2 - 2)", 'arithmetic divides by zero; got "1 / (2 - 2)"; mend the divisor'),
    ("1e300 * 1e300", 'the value of the arithmetic is too large; got "1e300 * 1e300"; use '
                      "smaller numbers"),
    ("__import__('os')", "arithmetic has only numbers, sizes, + - * / and brackets; got "
                         '"__import__(\'os\')"; take out "\'"'),
])
def test_messages(text: str, message: str) -> None:
    with pytest.raises(BadInput) as caught:
        evaluate(text, {"reach": 1.0, "absent": 2.0})
    assert str(caught.value) == message


def test_nesting_and_length_are_bounded() -> None:
    fits = "(" * DEEPEST + "1" + ")" * DEEPEST
    assert evaluate(fits, {}) == 1.0
    with pytest.raises(BadInput, match="at most 50 brackets inside one another"):
        evaluate(f"({fits})", {})
    with pytest.raises(BadInput, match="at most 1000 characters; got 1001 characters"):
        evaluate("1" * 1001, {})
    assert evaluate("-" * 999 + "1", {}) == -1.0


@pytest.mark.parametrize(("value", "message"), [
    (True, "must be a number or arithmetic; got true; "),
    (None, "must be a number or arithmetic; got null; "),
    ([1], r"must be a number or arithmetic; got \[1\]; "),
    (math.nan, "must be a finite number; got nan; "),
    (-math.inf, "must be a finite number; got -inf; "),
    (10**400, "must be a finite number; got a whole number of more than 60 digits; "),
])
def test_what_is_no_number(value: object, message: str) -> None:
    with pytest.raises(BadInput, match=message):
        read_number(value, {})


def test_names_in_a_text() -> None:
    assert names_in("a + b*a - 2") == ("a", "b")


def resolve(raw: dict[str, object]) -> tuple[dict[str, float], str]:
    notes = Notes(lambda _: "")
    values = resolve_sizes(notes, raw)
    try:
        notes.stop_if_any()
    except BadInput as bad:
        return values, str(bad)
    return values, ""


def test_sizes_in_any_order() -> None:
    values, told = resolve({"c": "a + b", "b": "2 * a", "a": 1.5})
    assert (values, told) == ({"c": 4.5, "b": 3.0, "a": 1.5}, "")


def test_a_long_chain_of_sizes() -> None:
    count = 5000
    raw: dict[str, object] = {f"s{k}": f"s{k + 1} + 1" for k in range(count)}
    values, told = resolve({**raw, f"s{count}": 0})
    assert told == ""
    assert values["s0"] == count


def test_a_circle_is_told_once() -> None:
    values, told = resolve({"d": "a", "a": "b", "b": "c - 1", "c": "a", "free": 1})
    assert told == ("sizes.a: sizes may not refer to one another in a circle; got "
                    "a → b → c → a; give one of them a number")
    assert values["free"] == 1.0
    assert math.isnan(values["d"])


def test_a_size_that_is_itself() -> None:
    _, told = resolve({"a": "a"})
    assert told == ("sizes.a: sizes may not refer to one another in a circle; got a → a; "
                    "give one of them a number")


def test_sizes_have_names_of_one_word() -> None:
    _, told = resolve({"jib-length": 1.0, "rest": 2.0})
    assert told.splitlines() == [
        "sizes.jib-length: a size's name is one word of letters, digits and _, and not 'rest'; "
        'got "jib-length"; rename it; arithmetic could not tell it apart',
        "sizes.rest: a size's name is one word of letters, digits and _, and not 'rest'; "
        'got "rest"; rename it; arithmetic could not tell it apart',
    ]


def test_a_refused_size_raises_no_second_complaint() -> None:
    with pytest.raises(BadInput) as caught:
        make_rig({"a": ["w", 0], "b": [1, "w + v"]}, sizes={"w": "1/0", "v": "w"})
    assert str(caught.value) == ('sizes.w: arithmetic divides by zero; got "1/0"; '
                                 "mend the divisor")


def test_arithmetic_stands_wherever_a_number_may() -> None:
    rig = make_rig(
        {"a": {"at": [0, "-w"], "pin": True, "layer": "w * 2"}, "b": ["w", 0], "c": ["2*w", 0]},
        {"ab": {"ends": ["a", "b"], "length": "w", "play": "w/100"}},
        sizes={"w": 2, "one": "w/2"}, slack="one / 1000",
        plane={"origin": ["w", 0, 0], "x": [0, "w", 0], "y": [0, 0, "w"]},
        rams={"r": {"ends": ["b", "c"], "range": ["w/4", "w*4"]}},
        rails={"s": {"joint": "c", "through": ["w", 1], "direction": ["w", 0], "range": ["-w", 9]}},
        cranks={"k": {"turns": "ab", "zero": "45*w", "range": ["-w", "w"]}},
        ties={"t": {"sum": {"r": "w", "s": "-w"}, "equals": "w + 1"}},
    )
    assert rig.joints[0].at == (0.0, -2.0)
    assert rig.joints[0].layer == 4.0
    assert (rig.bones[0].length, rig.bones[0].play) == (2.0, 0.02)
    assert rig.slack == 0.001
    assert rig.plane.origin == (2.0, 0.0, 0.0)
    assert rig.plane.x == (0.0, 1.0, 0.0)
    assert rig.rams[0].range == (0.5, 8.0)
    assert (rig.rails[0].through, rig.rails[0].direction) == ((2.0, 1.0), (1.0, 0.0))
    assert (rig.cranks[0].zero, rig.cranks[0].range) == (90.0, (-2.0, 2.0))
    assert rig.ties[0].sum == (("r", 2.0), ("s", -2.0))
    assert rig.ties[0].equals == 3.0
