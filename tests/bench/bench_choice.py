"""How long the choice takes, as ratios within one run. Run: python tests/bench/bench_choice.py

Whole commands are set against ``python -c pass``.
"""

from __future__ import annotations

import statistics
import subprocess
import sys
import time
from pathlib import Path

ROOT = Path(__file__).parent.parent.parent
RUNS = 5


def seconds(*command: str) -> float:
    """Median wall time of a whole command."""
    times = []
    for _ in range(RUNS):
        start = time.perf_counter()
        subprocess.run(command, cwd=ROOT, check=True, stdout=subprocess.DEVNULL)
        times.append(time.perf_counter() - start)
    return statistics.median(times)


def main() -> None:
    """Print one line per command: median seconds and the ratio to an empty Python."""
    empty = seconds(sys.executable, "-c", "pass")
    print(f"python -c pass                  {empty:6.3f} s")
    program = (sys.executable, "-m", "selector")
    for label, arguments in [
        ("selector --help", ["--help"]),
        ("catalogue", ["catalogue", "catalogues"]),
        *((f"pick {name}", ["pick", f"examples/{name}.yaml"])
          for name in ("seed-dispenser", "tray-store", "drying-cabinet")),
        ("judge bench-dispenser", ["judge", "examples/bench-dispenser.yaml"]),
    ]:  # fmt: skip
        taken = seconds(*program, *arguments)
        print(f"{label:30}  {taken:6.3f} s  {taken / empty:6.0f} times python -c pass")


if __name__ == "__main__":
    main()
