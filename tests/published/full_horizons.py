"""Take every system of this folder to its published horizon and keep what came of it.

    PYTHONPATH=tests python tests/published/full_horizons.py [NAME ...]

One draw of each, one process, through the command line. Each line of ``full_horizons.jsonl`` is a system: a new line
takes the place of the old one. Systems whose outcome is not certain enough to be a test are run too.
"""

import json
import platform
import sys
import tempfile
import time
from collections.abc import Sequence
from datetime import UTC, datetime
from importlib.metadata import version
from pathlib import Path
from typing import Any

from published_systems import FOLDER, NOT_ASSERTED, Row, horizon_yr, largest_eccentricities, scenario_of, screened

RECORD = Path(__file__).parent / "full_horizons.jsonl"
WORDS = ("survival", "ending", "trust", "motion", "verdict", "method", "handover_why")
NUMBERS = ("time", "step", "departure_time", "handover_time", "megno", "megno_time", "lyapunov_time", "energy_error")


def line_of(name: str) -> dict[str, Any]:
    text = scenario_of(name)
    began = time.monotonic()
    with tempfile.TemporaryDirectory() as folder:
        (row,) = screened(text, Path(folder), workers=1)
    return {
        "id": name,
        "asserted": name not in NOT_ASSERTED,
        "span_yr": horizon_yr(text),
        **{word: row[word] for word in WORDS},
        **{number: _number(row, number) for number in NUMBERS},
        "e_most": [round(e, 4) for e in largest_eccentricities(row)],
        "restarts": int(row["restarts"]),
        "wall_s": round(time.monotonic() - began, 1),
        "versions": {package: version(package) for package in ("stabcheck", "rebound", "numpy", "numba")},
        "machine": platform.machine(),
        "date": datetime.now(UTC).date().isoformat(),
    }


def _number(row: Row, name: str) -> float | None:
    return float(f"{float(row[name]):.6g}") if row[name] else None


def main(names: Sequence[str]) -> None:
    kept = [json.loads(line) for line in RECORD.read_text().splitlines()] if RECORD.exists() else []
    lines = {line["id"]: line for line in kept}
    for name in names or sorted(file.stem for file in FOLDER.glob("*.toml")):
        lines[name] = line_of(name)
        RECORD.write_text("".join(json.dumps(lines[key]) + "\n" for key in sorted(lines)))


if __name__ == "__main__":
    main(sys.argv[1:])
