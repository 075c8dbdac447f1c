#!/usr/bin/env python3
"""Process time of `speclib --help` and of a search on the demo library, as ratios to `python -c pass` in one run.

Run it with the Python of an environment that has speclib installed, e.g.
.venv/demo/bin/python scripts/bench_startup.py [--json]
"""

from __future__ import annotations

import json
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

REPOSITORY = Path(__file__).resolve().parents[1]
DEMO = REPOSITORY / "demo_library"
ROUNDS = 9
GOALS_S = {"speclib --help": 0.25, "speclib search": 0.8}
CALL = "import sys; from speclib.cli.main import main; main(sys.argv[1:])"


def process_time(command: list[str]) -> float:
    """User and system time of a command in seconds; wall time where the system does not tell (Windows)."""
    try:
        import resource
    except ImportError:
        began = time.perf_counter()
        subprocess.run(command, check=True, capture_output=True)
        return time.perf_counter() - began
    before = resource.getrusage(resource.RUSAGE_CHILDREN)
    subprocess.run(command, check=True, capture_output=True)
    after = resource.getrusage(resource.RUSAGE_CHILDREN)
    return after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime


def main() -> int:
    """Measure in turns and print medians, ratios and goals."""
    speclib = [sys.executable, "-c", CALL]
    with tempfile.TemporaryDirectory() as folder:
        library = str(Path(folder) / "bench.sqlite")
        for arguments in (
            ["init", library],
            ["-L", library, "intake", "--manifest", str(DEMO / "manifest.csv"), "--by", "bench"],
        ):
            subprocess.run([*speclib, *arguments], check=True, capture_output=True)
        unknown = str(DEMO / "unknowns" / "unknown_a.txt")
        commands = {
            "python -c pass": [sys.executable, "-c", "pass"],
            "speclib --help": [*speclib, "--help"],
            "speclib search": [*speclib, "-L", library, "search", unknown, "--mass", "286", "--measure", "shifted"],
        }
        times: dict[str, list[float]] = {name: [] for name in commands}
        for _ in range(ROUNDS):
            for name, command in commands.items():
                times[name].append(process_time(command))
    medians = {name: statistics.median(values) for name, values in times.items()}
    base = medians["python -c pass"]
    rows = [
        {"command": name, "seconds": round(t, 3), "ratio": round(t / base, 1), "goal_seconds": GOALS_S.get(name)}
        for name, t in medians.items()
    ]
    if "--json" in sys.argv:
        print(json.dumps(rows, indent=2))
    else:
        print(f"{'command':<16} {'median s':>9} {'ratio':>7} {'goal s':>7}")
        for row in rows:
            print(f"{row['command']:<16} {row['seconds']:>9} {row['ratio']:>7} {row['goal_seconds'] or '':>7}")
    return int(any(medians[name] > goal for name, goal in GOALS_S.items()))


if __name__ == "__main__":
    raise SystemExit(main())
