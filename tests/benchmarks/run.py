"""All benchmarks, each in a process of its own: python tests/benchmarks/run.py"""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

HERE = Path(__file__).parent

if __name__ == "__main__":
    for script in (["bench_fourbar.py"], ["bench_strider.py"], ["bench_branches.py"],
                   ["bench_branches.py", "stream"], ["bench_csv.py"], ["bench_space.py"],
                   ["bench_scale.py"]):
        subprocess.run([sys.executable, HERE / script[0], *script[1:]], check=True, cwd=HERE)
