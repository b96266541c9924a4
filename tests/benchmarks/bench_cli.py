"""How long ``knucklepath --help`` takes, against a bare Python: a ratio in one run.

python tests/benchmarks/bench_cli.py
"""

from __future__ import annotations

import statistics
import subprocess
import sys
import time
from pathlib import Path


def seconds(command: list[str]) -> float:
    start = time.perf_counter()
    subprocess.run(command, check=True, stdout=subprocess.DEVNULL)
    return time.perf_counter() - start


def main() -> None:
    script = Path(sys.executable).with_name("knucklepath")
    ours, bare = [str(script), "--help"], [sys.executable, "-c", "pass"]
    seconds(ours)
    pairs = [(seconds(ours), seconds(bare)) for _ in range(25)]
    ratio = statistics.median(a / b for a, b in pairs)
    print(f"knucklepath --help takes {ratio:.2f} times as long as python -c pass (goal: 4)")


if __name__ == "__main__":
    main()
