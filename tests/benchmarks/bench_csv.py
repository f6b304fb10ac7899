"""Writing joint positions as CSV, against the csv module; and what `import rigpose` costs."""

from __future__ import annotations

import csv
import subprocess
import sys
import tempfile
from pathlib import Path

import numpy as np
from machine import timed

from rigpose.files.csvfile import CsvWriter

FRAMES, JOINTS = 20_000, 30
PARTS = "import numpy, scipy.linalg, scipy.sparse, scipy.sparse.csgraph, scipy.sparse.linalg"


def written() -> None:
    places = np.random.default_rng(1).normal(size=(FRAMES, JOINTS, 3))
    frames = np.arange(FRAMES, dtype=float)
    names = [f"joint{k}" for k in range(JOINTS)]
    with tempfile.TemporaryDirectory() as folder:
        file = Path(folder) / "out.csv"

        def ours() -> None:
            with CsvWriter(file, names) as writer:
                writer.block(frames, places)

        def plain() -> None:
            with file.open("w", newline="") as out:
                rows = csv.writer(out)
                rows.writerows((int(f), n, *p) for f, pose in zip(frames, places, strict=True)
                               for n, p in zip(names, pose.tolist(), strict=True))

        a, b = timed(ours), timed(plain)
    rows = FRAMES * JOINTS
    print(f"CSV: {rows / a:,.0f} rows a second; the csv module {rows / b:,.0f}; "
          f"{b / a:.1f} times faster")


def imported() -> None:
    def run(code: str) -> None:
        subprocess.run([sys.executable, "-c", code], check=True)

    ours, parts = timed(lambda: run("import rigpose"), 9), timed(lambda: run(PARTS), 9)
    nothing = timed(lambda: run("pass"), 9)
    print(f"import rigpose: {ours - nothing:.3f} s; numpy and the parts of scipy that it uses: "
          f"{parts - nothing:.3f} s; ratio {(ours - nothing) / (parts - nothing):.2f}")


if __name__ == "__main__":
    written()
    imported()
