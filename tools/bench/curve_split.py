"""Time keys, order, split and cell_part of random 3-D centres against one argsort of the keys.

    python tools/bench/curve_split.py [--cells 10000000] [--parts 1000] [--repeats 5]

All figures come from one run; each is the median of the repeats, the kernels compiled before. The
reference is `np.argsort(keys, kind="stable")` on the same keys. The last lines say what limits
the work: the bytes it must move through memory, and how long this machine takes to copy as many.
"""

from __future__ import annotations

import argparse
import statistics
import time
from collections.abc import Callable

import numpy as np

from sfcpart.comm import SerialComm
from sfcpart.curve import curve_keys, curve_order
from sfcpart.kernels.radix import stable_order
from sfcpart.kernels.threads import n_threads, run_ranges
from sfcpart.methods.problem import Problem
from sfcpart.methods.registry import METHODS

TARGET = 0.35


def median_time(call: Callable[[], object], repeats: int) -> float:
    call()
    seconds = []
    for _ in range(repeats):
        began = time.perf_counter()
        call()
        seconds.append(time.perf_counter() - began)
    return statistics.median(seconds)


def copy_rows(start: int, stop: int, source: np.ndarray, target: np.ndarray) -> None:
    target[start:stop] = source[start:stop]


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--cells", type=int, default=10_000_000)
    parser.add_argument("--parts", type=int, default=1000)
    parser.add_argument("--repeats", type=int, default=5)
    given = parser.parse_args()
    n, n_parts = given.cells, given.parts
    rng = np.random.default_rng(0)
    centers = rng.random((n, 3))
    weight = rng.integers(1, 1_000_000, n)
    keys = curve_keys(centers)

    def split(weight: np.ndarray | None = None) -> object:
        problem = Problem(
            centers, n_parts, np.ones(n_parts), SerialComm(), graph=lambda: None, weight=weight
        )
        return METHODS["hilbert"].run(problem)

    spare = np.empty_like(keys)
    work = {
        "np.argsort(keys, kind='stable')": lambda: np.argsort(keys, kind="stable"),
        "keys": lambda: curve_keys(centers),
        "sort keys": lambda: stable_order(keys),
        "keys and order": lambda: curve_order(centers),
        f"keys, order, split into {n_parts}, cell_part": split,
        "the same with weights": lambda: split(weight),
    }
    copy = median_time(lambda: run_ranges(copy_rows, n, keys, spare), given.repeats)
    seconds = {name: median_time(call, given.repeats) for name, call in work.items()}
    reference = next(iter(seconds.values()))
    print(f"{n} random centres, {n_threads()} threads, medians of {given.repeats}")
    for name, value in seconds.items():
        print(f"  {name:48s} {value:7.3f} s   ratio {value / reference:.3f}")
    # centres twice (box, keys); keys written, and read by survey, count, scatter, two more surveys;
    # key and row written by the scatter, read and written by the finish; rows, labels, parts
    moved = n * (2 * 24 + 8 + 5 * 8 + 12 + 2 * 12 + 4 + 2 * 4 + 4)
    rate = 16 * n / copy
    print(
        f"  limit: {moved / 1e9:.2f} GB at {rate / 1e9:.1f} GB/s (copying, all threads) = "
        f"{moved / rate:.3f} s, ratio {moved / rate / reference:.3f}; target {TARGET}"
    )


if __name__ == "__main__":
    main()
