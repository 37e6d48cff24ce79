"""Write a series: see `python -m tools.series --help`."""

from __future__ import annotations

import argparse
from typing import Any

import tools.series
from sfcpart.files.series.hdf5_series import write_series
from tools.series.front import front_series
from tools.series.spots import slow_series, spot_series

MAKERS = {"front": front_series, "spots": spot_series, "slow": slow_series}


def main() -> None:
    parser = argparse.ArgumentParser(
        "tools.series",
        description=tools.series.__doc__,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    parser.add_argument("which", choices=MAKERS)
    parser.add_argument("file", help="HDF5 file to write")
    parser.add_argument("--size", type=int, help="cubes across the box")
    parser.add_argument("--frames", type=int, help="how many frames (60)")
    parser.add_argument("--steps", type=int, help="steps of the solver in a frame (10)")
    parser.add_argument("--levels", type=int, help="front: how often cubes are halved (3)")
    parser.add_argument("--parts", type=int, help="slow: number of ranks (64)")
    parser.add_argument("--subcycling", action="store_true", help="front: fine cells weigh more")
    given = parser.parse_args()
    names = {"frames": "n_frames", "steps": "steps", "levels": "n_levels", "parts": "n_parts"}
    wish: dict[str, Any] = {
        long: getattr(given, short)
        for short, long in names.items()
        if getattr(given, short) is not None
    }
    if given.subcycling:
        wish["subcycling"] = True
    if given.size is not None:
        wish["n"] = given.size
    try:
        count = write_series(given.file, MAKERS[given.which](**wish))
    except TypeError as error:
        parser.error(f"{given.which} does not take that: {error}")
    print(f"{given.file}: {count} frames")


if __name__ == "__main__":
    main()
