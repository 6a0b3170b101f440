"""Speed and memory in one run on one machine, beside reference libraries: `make bench`, or `python -m benchmarks`.

Every line is measured in this run; ratios compare what ran here, never another machine. Results go to
`benchmarks/results/` as JSON with versions and machine.

    python -m benchmarks [--quick]
"""

from __future__ import annotations

import argparse
import datetime as dt
import json
import os
import platform
import subprocess
import sys
from importlib import metadata
from pathlib import Path

RESULTS = Path(__file__).parent / "results"
# Each in a process of its own, so that one's peak memory is not another's.
FULL = {
    "kriging kernel against PyKrige's moving window": ["benchmarks.kernel"],
    "kriging kernel, clustered stations": ["benchmarks.kernel", "--layout", "clusters", "--skip-pykrige"],
    "members beside the kriging alone": ["benchmarks.members"],
    "memory of members": ["benchmarks.members", "--memory"],
    "seams between tiles": ["benchmarks.seams"],
    "ten million cells, a million stations": ["benchmarks.scale"],
    "a million compositions": ["benchmarks.composition"],
    "validation of 10,000 stations": ["benchmarks.validation"],
    "reading spreadsheets": ["benchmarks.intake"],
    "a bed of ten million cells": ["benchmarks.build"],
}
QUICK = {
    "kriging kernel against PyKrige's moving window": ["benchmarks.kernel", "--cells", "200000", "--stations", "5000"],
    "a hundred thousand compositions": ["benchmarks.composition", "--rows", "100000"],
}


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--quick", action="store_true", help="smaller sizes, about two minutes")
    options = parser.parse_args()
    record: dict[str, object] = {
        "when": dt.datetime.now(dt.UTC).isoformat(timespec="seconds"),
        "machine": {"processor": platform.machine(), "cores": os.cpu_count(), "python": platform.python_version()},
        "versions": {name: metadata.version(name) for name in ("numpy", "scipy", "numba", "pykrige", "pandas")},
    }
    failed = 0
    for title, command in (QUICK if options.quick else FULL).items():
        print(f"\n{title}", flush=True)
        done = subprocess.run([sys.executable, "-m", *command], capture_output=True, text=True, check=False)
        print("".join(f"  {line}\n" for line in (done.stdout or done.stderr).splitlines()), end="", flush=True)
        record[title] = (done.stdout or done.stderr).splitlines()
        failed += done.returncode != 0
    RESULTS.mkdir(exist_ok=True)
    path = RESULTS / f"{str(record['when'])[:19].replace(':', '')}.json"
    path.write_text(json.dumps(record, indent=2) + "\n")
    print(f"\nwrote {path.relative_to(Path.cwd()) if path.is_relative_to(Path.cwd()) else path.name}")
    return 1 if failed else 0


if __name__ == "__main__":
    sys.exit(main())
