"""How long the command takes before it does anything, as multiples of ``import numpy``. Run: python start_times.py

Nine pairs each, the two of a pair right after one another, medians of the ratios. Aims: help at most 2, preview of a
table at most 10. Record (1 December 2026, 2 cores, other work going on): help 0.38, preview 6.1 (of which 0.2 s is the
measurement of the speed).
"""

import os
import statistics
import subprocess
import sys
import time
from pathlib import Path

PAIRS = 9
ROOT = Path(__file__).resolve().parents[2]
SCENARIO = ROOT / "scenarios" / "compact_four.toml"
COMMANDS = {"--help": ["--help"], "preview": ["preview", str(SCENARIO)]}


def seconds(*words: str) -> float:
    environment = {**os.environ, "PYTHONPATH": str(ROOT)}
    start = time.perf_counter()
    subprocess.run([sys.executable, *words], stdout=subprocess.DEVNULL, env=environment, check=True)
    return time.perf_counter() - start


def main() -> None:
    for name, words in COMMANDS.items():
        pairs = [(seconds("-m", "stabcheck", *words), seconds("-c", "import numpy")) for _ in range(PAIRS)]
        ratio = statistics.median(ours / numpy for ours, numpy in pairs)
        ours, numpy = (statistics.median(column) for column in zip(*pairs, strict=True))
        print(f"{name:<8} {ratio:5.2f} x import numpy   ({ours:.3f} s, numpy {numpy:.3f} s)")


if __name__ == "__main__":
    main()
