"""TOML as we write it, and the lines on which keys stand."""

from __future__ import annotations

import json
import tomllib

from hypothesis import given
from hypothesis import strategies as st

from rigpose.files import tomltext
from rigpose.files.lines import line_of, scan

KEYS = st.text(st.characters(codec="utf-8", exclude_characters="\r"), max_size=6)
SCALARS = st.integers(-9, 9) | st.booleans() | st.floats(allow_nan=False) | KEYS
VALUES = st.recursive(SCALARS, lambda v: st.lists(v, max_size=3) | st.dictionaries(
    KEYS, v, max_size=3), max_leaves=8)


@given(st.dictionaries(KEYS, VALUES, max_size=4))
def test_our_toml_reads_back_with_pythons_reader(data: dict[str, object]) -> None:
    text = "".join(f"{tomltext.key(k)} = {tomltext.value(v)}\n" for k, v in data.items())
    assert tomllib.loads(text) == data
    lines = scan(text)
    assert [lines.of((k,)) for k in data] == list(range(1, len(data) + 1))
    assert not lines.repeats


def test_lines_of_all_that_toml_allows() -> None:
    text = '''title = "a # b" # c
"quoted key".x = 1
[[keys]]
frame = 1
drive = { slew = 0.0, luff = { deep = 2 } }
[[keys]]
frame = [ # here
  1,
  2 ] # there
[keys.inner]
note = """
[not] = "a header"
"""
[a.'b.c']
d = 1979-05-27 07:32:00
e = \'\'\'it\'s\'\'\'
f = 2
'''
    tomllib.loads(text)
    expected = {("title",): 1, ("quoted key", "x"): 2, ("keys", 0, "frame"): 4,
                ("keys", 0, "drive", "luff", "deep"): 5, ("keys", 1): 6, ("keys", 1, "frame", 1): 9,
                ("keys", 1, "inner", "note"): 11, ("a", "b.c", "d"): 15, ("a", "b.c", "e"): 16,
                ("a", "b.c", "f"): 17, ("keys", 1, "nothing"): 6, ("a", "b.c", "f", "g"): 17}
    assert {path: line_of(text, path) for path in expected} == expected
    assert line_of(text, ("unknown",)) is None


def test_lines_of_tables_that_only_stand_around_others() -> None:
    text = """[limits.knee]
either = true
[limits.fold]
range = [0, 90]
[[a.b.c]]
d = 1
[limits]
[a]
e = 2
"""
    tomllib.loads(text)
    expected = {("limits",): 7, ("limits", "knee"): 1, ("limits", "fold", "range"): 4,
                ("a",): 8, ("a", "b"): 5, ("a", "b", "c"): 5, ("a", "b", "c", 0, "d"): 6}
    assert {path: line_of(text, path) for path in expected} == expected
    # Tables that stand around others may have a header of their own, before or after them.
    assert scan(text).repeats == []
    above = text.partition("[limits]")[0]
    assert (line_of(above, ("limits",)), line_of(above, ("limits", "new", "at"))) == (1, 1)


def test_lines_of_json() -> None:
    text = '{"a": {\n "b\\u0063": [1,\n {"d": "}"}],\n "e": -1.5e3},\n "f": null}'
    json.loads(text)
    expected = {("a",): 1, ("a", "bc"): 2, ("a", "bc", 1, "d"): 3, ("a", "e"): 4, ("f",): 5}
    assert {path: line_of(text, path, "json") for path in expected} == expected
