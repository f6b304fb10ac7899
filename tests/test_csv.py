"""CSV: read back by our reader, by Python's csv module and by NumPy; whole files or none."""

from __future__ import annotations

import csv
import os
import signal
import subprocess
import sys
from collections.abc import Sequence
from pathlib import Path

import numpy as np
import numpy.typing as npt
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigpose.files.csvfile import CsvWriter, Layout, RigWriter, ValuesWriter, read_positions
from rigpose.files.disk import Beside, read_text
from rigpose.ground.errors import BadInput
from rigpose.model.make import make_rig

Floats = npt.NDArray[np.float64]
LAYOUTS: tuple[Layout, ...] = ("tall", "wide")


def some(n_frames: int, n_joints: int, seed: int = 7) -> Floats:
    return np.random.default_rng(seed).normal(size=(n_frames, n_joints, 3)) * 10.0


def write(path: Path, joints: Sequence[str], frames: npt.ArrayLike, positions: Floats,
          layout: Layout = "tall", *, names: dict[str, str] | None = None) -> None:
    before = positions.copy()
    with CsvWriter(path, joints, layout=layout, names=names) as out:
        out.block(frames, positions)
    np.testing.assert_array_equal(positions, before)


@pytest.fixture
def file(tmp_path: Path) -> Path:
    return tmp_path / "q010.csv"


def test_tall_to_the_byte(file: Path) -> None:
    positions = np.array([[[0.1, 2.0, 0.0], [1e22, -1.5, 1e-7]]])
    write(file, ["hook", "elbow"], [1], positions)
    assert file.read_bytes() == (b"frame,joint,x,y,z\r\n1,hook,0.1,2.0,0.0\r\n"
                                 b"1,elbow,1e22,-1.5,1e-7\r\n")


def test_wide_to_the_byte(file: Path) -> None:
    positions = np.array([[[0.1, 2.0, 0.0], [3.0, 4.0, 5.0]]])
    write(file, ["hook", "elbow"], [1.5], positions, "wide")
    assert file.read_bytes() == (
        b"frame,hook.x,hook.y,hook.z,elbow.x,elbow.y,elbow.z\r\n1.5,0.1,2.0,0.0,3.0,4.0,5.0\r\n")


def test_a_missing_pose_is_empty_cells(file: Path) -> None:
    write(file, ["null"], [1], np.full((1, 1, 3), np.nan))
    assert file.read_bytes().splitlines()[1] == b"1,null,,,"


def test_values_to_the_byte(file: Path) -> None:
    with ValuesWriter(file, ["wheel", "lift"], branches=True) as out:
        out.block([1, 2], [[360.0, 0.25], [np.nan, 1.0]], branch="elbow:left")
    assert file.read_bytes().decode().split("\r\n") == [
        "frame,branch,name,value", "1,elbow:left,wheel,360.0", "1,elbow:left,lift,0.25",
        "2,elbow:left,wheel,", "2,elbow:left,lift,1.0", ""]


@pytest.mark.parametrize("layout", LAYOUTS)
def test_blocks_and_branches_read_back_exactly(file: Path, layout: Layout) -> None:
    joints = [f"rib{k}/tip" for k in range(9)]
    # More than one piece of the writer in each block.
    frames, positions = np.arange(6000) / 4.0, np.stack([some(6000, 9), some(6000, 9, 8)])
    positions[1, 17:30] = np.nan
    with CsvWriter(file, joints, layout=layout, branches=True) as out:
        for row, branch in enumerate(("elbow:left", 'the "low", wide one')):
            for k in range(0, 6000, 2500):
                out.block(frames[k:k + 2500], positions[row, k:k + 2500], branch)
    got = read_positions(file)
    assert (got.joints, got.branches) == (tuple(joints), ("elbow:left", 'the "low", wide one'))
    np.testing.assert_array_equal(got.frames, frames)
    np.testing.assert_array_equal(got.positions, positions)


@given(st.lists(st.floats(allow_nan=False, allow_infinity=False), min_size=3, max_size=3))
def test_digits_are_the_shortest_that_read_back(
    tmp_path_factory: pytest.TempPathFactory, place: list[float]
) -> None:
    # Outside check: Python's repr gives the shortest digits (David Gay's algorithm, as Python's
    # tutorial says under "Floating-Point Arithmetic").
    path = tmp_path_factory.getbasetemp() / "digits.csv"
    write(path, ["hook"], [1], np.array([[place]]))
    cells = path.read_text().splitlines()[1].split(",")[2:]
    for cell, value in zip(cells, place, strict=True):
        assert (float(cell), np.signbit(float(cell))) == (value, np.signbit(value))
        assert digits(cell) == digits(repr(value))


def digits(number: str) -> str:
    """The significant digits alone: what is shortest is them, not how the exponent is written."""
    return number.lower().partition("e")[0].replace(".", "").replace("-", "").strip("0")


names = st.text(st.characters(exclude_categories=["Cs", "Cc"]), min_size=1, max_size=12).map(
    str.strip).filter(bool)


@given(st.lists(names, min_size=1, max_size=5, unique=True), st.sampled_from(LAYOUTS))
def test_any_name_comes_back(
    tmp_path_factory: pytest.TempPathFactory, joints: list[str], layout: Layout
) -> None:
    path = tmp_path_factory.getbasetemp() / "names.csv"
    write(path, joints, [1, 2], some(2, len(joints)), layout)
    assert read_positions(path).joints == tuple(joints)


def test_python_s_csv_module_reads_it_line_by_line(file: Path) -> None:
    positions = some(2, 2)
    write(file, ["crane, left", 'the "hook"'], [1, 2], positions)
    with file.open(newline="", encoding="utf-8") as text:
        rows = list(csv.DictReader(text, strict=True))
    assert [row["joint"] for row in rows] == ["crane, left", 'the "hook"'] * 2
    got = [[float(row[axis]) for axis in "xyz"] for row in rows]
    assert got == positions.reshape(-1, 3).tolist()


def test_numpy_reads_it(file: Path) -> None:
    positions = some(5, 2)
    write(file, ["elbow", "hook"], np.arange(5.0), positions, "wide")
    table = np.loadtxt(file, delimiter=",", skiprows=1)
    np.testing.assert_array_equal(table[:, 1:], positions.reshape(5, 6))
    write(file, ["elbow", "hook"], np.arange(5.0), positions)
    tall = np.genfromtxt(file, delimiter=",", names=True, dtype=None, encoding="utf-8")
    np.testing.assert_array_equal(tall["x"].reshape(5, 2), positions[..., 0])


@pytest.mark.parametrize("layout", LAYOUTS)
def test_studio_names_go_out_and_come_in(file: Path, layout: Layout) -> None:
    studio = {"elbow": "crane01:elbow"}
    write(file, ["elbow", "hook"], [1], some(1, 2), layout, names=studio)
    assert "crane01:elbow" in file.read_text()
    assert read_positions(file).joints == ("crane01:elbow", "hook")
    assert read_positions(file, studio).joints == ("elbow", "hook")


@pytest.mark.parametrize("layout", LAYOUTS)
def test_a_rig_s_file_holds_the_joints_that_people_know(file: Path, layout: Layout) -> None:
    rig = make_rig({"post": {"at": [0, 0, 0], "pin": True}, "edge": [3, 0, 0], "latch": [3, 0, 2]},
                   dim=3, plates={"leaf": ["post", "edge", "latch"]}, names={"edge": "gate:edge"},
                   hinges={"swing": {"parts": ["ground", "leaf"], "at": "post", "axis": [0, 0, 1]}})
    assert rig.joint_names == ("post", "edge", "latch", "swing axis")
    positions = some(5, 4)
    with RigWriter(file, rig, layout=layout, branches=True) as out:
        out.block(np.arange(5), positions, "only")
        with pytest.raises(BadInput, match=r"numbers have the shape \(frames, \(4, 3\)\)"):
            out.block([1], positions[:1, :3], "only")
    got = read_positions(file, dict(rig.names))
    assert (got.joints, got.branches) == (("post", "edge", "latch"), ("only",))
    assert "gate:edge" in file.read_text()
    np.testing.assert_array_equal(got.positions[0], positions[:, :3])


def test_rows_come_in_any_order_with_gaps(file: Path) -> None:
    file.write_text("frame,joint,x,y,z\n\n2,hook,1,2,3\n1,elbow,4,5,\n1,hook,nan,8,9\n")
    got = read_positions(file)
    assert (got.frames.tolist(), got.joints, got.branches) == ([1, 2], ("hook", "elbow"), ())
    nan = np.nan
    np.testing.assert_array_equal(got.positions, [[[[nan, 8, 9], [4, 5, nan]],
                                                   [[1, 2, 3], [nan, nan, nan]]]])


def test_an_exception_leaves_the_old_file_whole_and_nothing_else(file: Path) -> None:
    file.write_text("approved")
    with pytest.raises(KeyboardInterrupt), CsvWriter(file, ["hook"]) as out:
        out.block([1], some(1, 1))
        raise KeyboardInterrupt
    assert file.read_text() == "approved"
    assert list(file.parent.iterdir()) == [file]


def test_a_killed_run_leaves_the_old_file_whole(file: Path) -> None:
    file.write_text("approved")
    code = ("import sys, numpy as np\nfrom rigpose.files.csvfile import CsvWriter\n"
            "with CsvWriter(sys.argv[1], ['hook']) as out:\n"
            "    out.block(np.arange(1e5), np.ones((100000, 1, 3)))\n"
            "    print('written', flush=True)\n    sys.stdin.read()\n")
    with subprocess.Popen([sys.executable, "-c", code, file], stdin=subprocess.PIPE,
                          stdout=subprocess.PIPE) as run:
        assert run.stdout is not None
        assert run.stdout.readline() == b"written\n"
        os.kill(run.pid, signal.SIGKILL)
    assert file.read_text() == "approved"


def test_a_link_stays_a_link(file: Path) -> None:
    file.write_text("old")
    link = file.with_name("latest.csv")
    link.symlink_to(file)
    write(link, ["hook"], [1], np.zeros((1, 1, 3)))
    assert link.is_symlink()
    assert file.read_text().startswith("frame,joint")


def test_where_no_file_can_be_written(tmp_path: Path) -> None:
    with pytest.raises(BadInput, match="output goes to a file; got something else"), \
            CsvWriter(tmp_path, ["hook"]):
        pass
    with pytest.raises(BadInput, match=r"nowhere/q010\.csv: the file can't be written; got No such "
                                       r"file or directory; check the path, the rights and"), \
            CsvWriter(tmp_path / "nowhere" / "q010.csv", ["hook"]):
        pass
    with pytest.raises(ValueError, match="inside the with block"):
        Beside(tmp_path / "q010.csv").write(b"")


@pytest.mark.parametrize(("text", "message"), [
    ("", "q010.csv: the first row is a header; got an empty file; write frame,joint,x,y,z or "
         "frame,elbow.x,elbow.y,elbow.z,… (a column branch may follow frame)"),
    ("frame;joint;x;y;z\n", "q010.csv:1: header: the header is frame,joint,x,y,z or frame,elbow.x,"
     "elbow.y,elbow.z,… (a column branch may follow frame); got frame;joint;x;y;z; cells are "
     "separated by commas"),
    ("frame,a.x,a.y,a.z,a.x,a.y,a.z\n", 'q010.csv:1: "a": a joint has its columns once; got twice'),
    ("frame,joint,x,y,z\n1,hook,1,2\n1,elbow,1,2,3\n2,hook\n",
     "q010.csv:2: a row has 5 cells as the header has; got 4\n"
     "q010.csv:4: a row has 5 cells as the header has; got 2"),
    ("frame,joint,x,y,z\n1,hook,1,2,east\n1,elbow,inf,2,1_0\n",
     'q010.csv:2: a cell is a finite number or empty; got "east"\n'
     'q010.csv:3: a cell is a finite number or empty; got "inf"\n'
     'q010.csv:3: a cell is a finite number or empty; got "1_0"'),
    ("frame,joint,x,y,z\n,hook,1,2,3\n",
     "q010.csv:2: frame: every row has a frame number; got none"),
    ("frame,joint,x,y,z\n1,hook,1,2,3\n2,hook,1,2,3\n1,hook,1,2,3\n",
     'q010.csv:4: "hook": a joint has one place in a frame; got a second one in frame 1'),
    ("frame,a.x,a.y,a.z\n1,1,2,3\n1,1,2,3\n",
     'q010.csv:3: "a": a joint has one place in a frame; got a second one in frame 1'),
    ('frame,joint,x,y,z\n1,"ho"ok,1,2,3\n',
     "q010.csv:2: the file is CSV (RFC 4180); got ',' expected after '\"'"),
])
def test_what_the_reader_refuses(file: Path, text: str, message: str) -> None:
    file.write_text(text)
    with pytest.raises(BadInput) as told:
        read_positions(file)
    assert str(told.value) == message


def test_scattered_rows_do_not_fill_the_memory(file: Path) -> None:
    file.write_text("frame,joint,x,y,z\n" + "".join(f"{k},j{k},0,0,0\n" for k in range(2000)))
    with pytest.raises(BadInput, match="2000 places for 2000 joints in 2000 frames"):
        read_positions(file)


def test_files_that_cannot_be_read(file: Path) -> None:
    with pytest.raises(BadInput, match="the file can't be read; got No such file or directory"):
        read_positions(file)
    file.write_bytes(b"frame,joint\n\xff")
    with pytest.raises(BadInput, match=r"^q010\.csv:2: a text file is UTF-8; got the byte 0xff; "
                                       r"save it again as UTF-8$"):
        read_positions(file)
    with pytest.raises(BadInput, match="a file is at most 0 MiB; got 13 bytes; is it the right"):
        read_text(file, 12)


def test_what_the_writer_refuses(file: Path) -> None:
    with pytest.raises(BadInput, match='a layout is tall or wide; got "long"'):
        CsvWriter(file, ["hook"], layout="long")  # type: ignore[arg-type]
    with pytest.raises(BadInput, match=r'"elbow": each name in a file stands for one joint or value'
                                       r"; got it twice; change one in the rig's \[names\]"):
        CsvWriter(file, ["hook", "elbow"], names={"hook": "elbow"})
    with CsvWriter(file, ["hook"]) as out:
        with pytest.raises(BadInput, match=r"numbers have the shape \(frames, \(1, 3\)\); got "
                                           r"\(1, 1, 2\) for frames \(1,\)"):
            out.block([1], np.zeros((1, 1, 2)))
        with pytest.raises(BadInput, match="frames are finite, numbers finite or NaN; got NaN or"):
            out.block([1], np.full((1, 1, 3), np.inf))
        with pytest.raises(BadInput, match="names its branch just where the file has that column"):
            out.block([1], np.zeros((1, 1, 3)), branch="elbow:left")
        out.block([], np.zeros((0, 1, 3)))
    assert file.read_bytes() == b"frame,joint,x,y,z\r\n"
