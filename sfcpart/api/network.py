"""The network of this job, measured, and kept in a file for predicted step times."""

from __future__ import annotations

import os
from os import PathLike
from pathlib import Path
from typing import Any

from sfcpart.comm import adopt, world
from sfcpart.errors import FileError
from sfcpart.files.network_file import network_file_content, read_network_file
from sfcpart.files.parts.tables import json_text
from sfcpart.measure.network import NetworkFigures, measure_messages
from sfcpart.measure.step_model import Network

__all__ = ["measure_network", "read_network", "write_network"]


def measure_network(comm: Any = None, *, largest: int = 1 << 22) -> NetworkFigures:
    """Measure latency and bandwidth of messages between ranks; all ranks together.

    Parameters
    ----------
    comm : mpi4py communicator or Comm, optional
        By default all ranks of this job.
    largest : int
        Bytes of the largest message.

    Returns
    -------
    NetworkFigures
        One fit for pairs of ranks on a node, one for pairs on two nodes; those there are.

    Raises
    ------
    InputError
        If there is one rank alone.

    Notes
    -----
    A second or so. Ping-pong between a few pairs, one at a time: what several pairs take from each
    other is not seen, and other jobs on the network are. A prediction ranks splits, it does not
    replace a measurement.

    Examples
    --------
    >>> from sfcpart.comm import run_ranks
    >>> figures, _ = run_ranks(2, lambda comm: measure_network(comm, largest=64))
    >>> figures.n_ranks, [fit.where for fit in figures.fits]
    (2, ['on-node'])
    """
    return measure_messages(world() if comm is None else adopt(comm), largest=largest)


def write_network(path: str | PathLike[str], figures: NetworkFigures) -> None:
    """Write measured figures to a file that `--network` and `read_network` take.

    Parameters
    ----------
    path : path
        Replaced in one step if it exists.
    figures : NetworkFigures

    Raises
    ------
    FileError
        If the file cannot be written.

    Examples
    --------
    >>> from sfcpart.comm import run_ranks
    >>> import tempfile
    >>> figures = run_ranks(2, lambda comm: measure_network(comm, largest=64))[0]
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     write_network(f"{folder}/network.json", figures)
    ...     read_network(f"{folder}/network.json").name
    'network.json, on-node'
    """
    place = Path(path)
    beside = place.with_name(f".{place.name}.{os.getpid()}.tmp")
    try:
        with beside.open("w", encoding="utf-8") as file:
            file.write(json_text(network_file_content(figures.to_json_dict())))
            file.flush()
            os.fsync(file.fileno())
        beside.replace(place)
    except OSError as error:
        raise FileError(f"{place}: cannot be written: {error.strerror or error}") from error
    finally:
        beside.unlink(missing_ok=True)


def read_network(path: str | PathLike[str], *, where: str | None = None) -> Network:
    """Read a measured network, for `StepModel(network=...)`.

    Parameters
    ----------
    path : path
        What `write_network` or `sfcpart network` wrote.
    where : {"across-nodes", "on-node"}, optional
        By default across nodes, where the file has that.

    Returns
    -------
    Network

    Raises
    ------
    FileError
        If the file is no such file, or lacks the place.

    Examples
    --------
    >>> import tempfile
    >>> row = '{"sfcpart_network": 1, "networks": {"on-node": {"latency": 1e-6, "bandwidth": 8e9}}}'
    >>> with tempfile.NamedTemporaryFile("w", suffix=".json") as file:
    ...     _ = file.write(row), file.flush()
    ...     read_network(file.name).bandwidth
    8000000000.0
    """
    return Network(*read_network_file(path, where=where))
