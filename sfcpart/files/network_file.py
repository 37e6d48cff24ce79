"""Files of measured networks, which `--network` takes: `sfcpart network -o network.json`.

JSON, one object:

================== ============================ ==================================================
key                value                        meaning
================== ============================ ==================================================
`sfcpart_network`  1                            version of this layout
`networks`         object                       by place, `on-node` and `across-nodes`, or one of
                                                them: `latency` (seconds a message), `bandwidth`
                                                (bytes a second); the rest is not used
`ranks`, `hosts`   numbers                      of the job that measured it
================== ============================ ==================================================
"""

from __future__ import annotations

import json
from math import isfinite
from os import PathLike
from pathlib import Path
from typing import Any

from sfcpart.errors import FileError

__all__ = ["network_file_content", "read_network_file"]

_VERSION = 1
_KEY = "sfcpart_network"
_PLACES = ("across-nodes", "on-node")


def network_file_content(figures: dict[str, Any]) -> dict[str, Any]:
    """Return what a file of measured figures holds."""
    return {_KEY: _VERSION, **figures}


def read_network_file(
    path: str | PathLike[str], *, where: str | None = None
) -> tuple[str, float, float, str]:
    """Return name, latency, bandwidth and source of a measured network.

    Parameters
    ----------
    path : path
    where : {"across-nodes", "on-node"}, optional
        By default across nodes, where the file has that.

    Raises
    ------
    FileError
        If the file cannot be read or is no such file, or lacks the place asked for.
    """
    place = Path(path)
    try:
        held = json.loads(place.read_text(encoding="utf-8"))
        networks = {name: dict(row) for name, row in held["networks"].items()}
        if held[_KEY] != _VERSION:
            raise FileError(f"{place}: is of version {held[_KEY]}; this sfcpart reads {_VERSION}")
    except FileError:
        raise
    except OSError as error:
        raise FileError(f"{place}: cannot be read: {error.strerror or error}") from error
    except (ValueError, LookupError, TypeError, AttributeError) as error:
        raise FileError(
            f"{place}: is no file of a measured network; wanted one that `sfcpart network` wrote"
        ) from error
    known = [name for name in _PLACES if name in networks]
    if not known or (where is not None and where not in known):
        raise FileError(
            f"{place}: has no network {where or 'at all'}; it has {', '.join(known) or 'none'}"
        )
    name = where or known[0]
    latency, bandwidth = (_number(place, networks[name], key) for key in ("latency", "bandwidth"))
    source = f"measured {name} between {held.get('ranks', '?')} ranks, {place.name}"
    return f"{place.name}, {name}", latency, bandwidth, source


def _number(place: Path, row: dict[str, Any], key: str) -> float:
    """Return a number of the file."""
    value: Any = row.get(key)
    is_number = isinstance(value, int | float) and not isinstance(value, bool) and isfinite(value)
    if not is_number or value < 0 or (key == "bandwidth" and value == 0):
        raise FileError(f"{place}: {key} is {value!r}; wanted a number, as `sfcpart network` wrote")
    return float(value)
