"""Print the figures: ``python -m tests.benchmarks [accuracy|grids|slices|sigma|signs|http|load …]``, all by default."""

from __future__ import annotations

import sys

from tests.benchmarks import accuracy, grids, http, load, sigma, signs, slices
from tests.benchmarks.machine import describe

PARTS = {
    "accuracy": accuracy.main,
    "grids": grids.main,
    "slices": slices.main,
    "sigma": sigma.main,
    "signs": signs.main,
    "http": http.main,
    "load": load.main,
}


def main() -> None:
    """Run the parts named on the command line."""
    names = sys.argv[1:] or list(PARTS)
    unknown = [name for name in names if name not in PARTS]
    if unknown:
        raise SystemExit(f"unknown benchmark {unknown[0]}; there are {', '.join(PARTS)}")
    print(describe())
    for name in names:
        print()
        PARTS[name]()


if __name__ == "__main__":
    main()
