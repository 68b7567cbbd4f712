"""``python3 -m tests.bench [NAME ...]``: speed and memory, measured on this machine now."""

import argparse
import importlib
import json
import os
import platform
import sys
from dataclasses import asdict
from importlib.metadata import version
from typing import Any

LIBRARIES = ("numpy", "scipy", "pydantic", "pyvisa", "pyvisa-py", "pyvisa-sim")
NAMES = ("model", "link", "ledger", "analysis", "forecast", "night")


def machine() -> dict[str, Any]:
    """What the figures belong to."""
    return {
        "python": platform.python_version(),
        **{name: version(name) for name in LIBRARIES},
        "system": f"{platform.system()} {platform.machine()}",
        "cores": os.cpu_count(),
        "load": os.getloadavg()[0] if hasattr(os, "getloadavg") else None,
    }


def main() -> None:
    """Run the benchmarks that are named, or all."""
    parser = argparse.ArgumentParser(prog="python3 -m tests.bench", description=__doc__)
    parser.add_argument("names", nargs="*", metavar="NAME", help=", ".join(NAMES))
    parser.add_argument("--quick", action="store_true", help="fewer rounds, smaller pieces")
    parser.add_argument("--json", action="store_true", help="print one object")
    options = parser.parse_args()
    if wrong := set(options.names) - set(NAMES):
        parser.error(f"no benchmark {', '.join(sorted(wrong))}; there are {', '.join(NAMES)}")
    # Small matrices: one thread is faster than two that wait for each other.
    for name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS"):
        os.environ.setdefault(name, "1")
    about = machine()
    if not options.json:
        print(", ".join(f"{name} {value}" for name, value in about.items()))
    results = {}
    for name in options.names or NAMES:
        outcome = importlib.import_module(f"tests.bench.{name}").run(options.quick)
        results[name] = asdict(outcome)
        if not options.json:
            print(name, *outcome.lines(), sep="\n", flush=True)
    if options.json:
        json.dump({"machine": about, "quick": options.quick, "results": results}, sys.stdout)
        print()


if __name__ == "__main__":
    main()
