"""Predict the time of one solver step from work, halo and neighbours of every part.

T = max over parts of (work / speed + messages),
messages = exchanges * sum over neighbours of (latency + bytes / bandwidth).

The message term is Hockney's T(m) = alpha + m / B. One such pair cannot fit small and large
messages alike (Hager and Wellein, Introduction to High Performance Computing for Scientists and
Engineers, section 4.5), so a prediction ranks splits; it does not replace a measurement.
Cost: linear in pairs of neighbouring parts.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from math import isfinite
from types import MappingProxyType
from typing import TYPE_CHECKING

import numpy as np

from sfcpart.dtypes import FloatArray
from sfcpart.errors import InputError

if TYPE_CHECKING:
    from sfcpart.measure.pairs import PartPairs

__all__ = ["DEFAULT_NETWORK", "LEAVES_OUT", "NETWORKS", "Network", "StepModel", "StepTime"]

LEAVES_OUT: tuple[str, ...] = (
    "exchange hidden behind computing",
    "waiting for neighbours that are late themselves",
    "contention, distance and topology of the network; ranks that share a node or its memory",
    "collective operations (dot products, global time step), input and output",
    "caches: the time per cell does not depend on how many cells a rank has",
    "halo across points or of more than one layer (count it in the bytes per halo cell)",
)
"""What the model does not see."""


@dataclass(frozen=True)
class Network:
    """How long a message takes: latency + bytes / bandwidth.

    Attributes
    ----------
    name : str
    latency : float
        Seconds per message.
    bandwidth : float
        Bytes per second.
    source : str
        Where the two numbers come from.
    """

    name: str
    latency: float
    bandwidth: float
    source: str = "given by the user"


def _preset(name: str, latency: float, bandwidth: float, spread: str) -> Network:
    """Label a preset as what it is: recalled, good to an order of magnitude."""
    return Network(name, latency, bandwidth, f"from memory, order of magnitude ({spread})")


NETWORKS: Mapping[str, Network] = MappingProxyType(
    {
        network.name: network
        for network in (
            _preset("gigabit-ethernet", 40e-6, 0.11e9, "30-50 us, 0.11 GB/s"),
            _preset("infiniband-fdr", 1.6e-6, 5e9, "QDR and FDR: 1.3-2 us, 3-6 GB/s"),
            _preset("infiniband-edr", 1.2e-6, 12e9, "EDR and HDR: 1.0-1.5 us, 11-24 GB/s"),
            _preset("infiniband-hdr", 1.2e-6, 24e9, "EDR and HDR: 1.0-1.5 us, 11-24 GB/s"),
            _preset("infiniband-ndr", 1.8e-6, 40e9, "NDR class: 1.5-2 us, 22-45 GB/s"),
            _preset("shared-memory", 0.4e-6, 8e9, "one node: 0.2-0.6 us, 5-10 GB/s"),
        )
    }
)
"""Networks known by name."""

DEFAULT_NETWORK = "infiniband-edr"


@dataclass(frozen=True)
class StepTime:
    """Predicted times of one step.

    Attributes
    ----------
    work, exchange : (n_parts,) float64
        Seconds each rank computes, and spends on messages.
    total : float
        Seconds of the slowest rank.
    exchange_share : float
        Share of the slowest rank's step that is messages.
    speed_up, efficiency : float
        Against one rank of mean speed; efficiency is speed-up over parts.
    """

    work: FloatArray
    exchange: FloatArray
    total: float
    exchange_share: float
    speed_up: float
    efficiency: float


@dataclass(frozen=True)
class StepModel:
    """What one step costs; all numbers are per rank.

    Attributes
    ----------
    cell_seconds : float
        Work of one cell of mean weight on a rank of mean speed (default 1e-6 s: common practice,
        no source).
    bytes_per_halo_cell : float
        Bytes sent for one halo cell in one exchange (default 40: five float64 fields).
    exchanges : float
        Halo exchanges in one step (default 5).
    network : Network
        Default "infiniband-edr".

    Examples
    --------
    >>> StepModel.from_preset("gigabit-ethernet", exchanges=3).network.latency
    4e-05
    """

    cell_seconds: float = 1e-6
    bytes_per_halo_cell: float = 40.0
    exchanges: float = 5.0
    network: Network = NETWORKS[DEFAULT_NETWORK]

    def __post_init__(self) -> None:
        self._check("cell_seconds", self.cell_seconds, zero_allowed=False)
        self._check("bytes_per_halo_cell", self.bytes_per_halo_cell, zero_allowed=True)
        self._check("exchanges", self.exchanges, zero_allowed=True)
        self._check("latency", self.network.latency, zero_allowed=True)
        self._check("bandwidth", self.network.bandwidth, zero_allowed=False)

    @staticmethod
    def _check(name: str, value: float, *, zero_allowed: bool) -> None:
        """Refuse numbers that make no time."""
        if not isfinite(value) or value < 0 or (value == 0 and not zero_allowed):
            wanted = "at least 0" if zero_allowed else "above 0"
            raise InputError(f"{name} of the step model is {value}; wanted finite, {wanted}")

    @classmethod
    def from_preset(
        cls,
        name: str | Network = DEFAULT_NETWORK,
        *,
        latency: float | None = None,
        bandwidth: float | None = None,
        cell_seconds: float = 1e-6,
        bytes_per_halo_cell: float = 40.0,
        exchanges: float = 5.0,
    ) -> StepModel:
        """Make a model on a network known by name, with the user's own numbers on top.

        Parameters
        ----------
        name : str or Network
            One of `NETWORKS`, or a network of your own (`sfcpart.read_network`).
        latency, bandwidth : float, optional
            Seconds per message and bytes per second in place of the preset's.
        cell_seconds, bytes_per_halo_cell, exchanges : float
            As in the class.

        Raises
        ------
        InputError
            If the name is unknown, or a number is not finite or out of range.
        """
        if isinstance(name, str) and name not in NETWORKS:
            raise InputError(f"unknown network {name!r}; known are {', '.join(NETWORKS)}")
        network = NETWORKS[name] if isinstance(name, str) else name
        if latency is not None or bandwidth is not None:
            whole = latency is not None and bandwidth is not None
            network = replace(
                network,
                name="own" if whole else f"{network.name}, changed",
                latency=network.latency if latency is None else latency,
                bandwidth=network.bandwidth if bandwidth is None else bandwidth,
                source="given by the user",
            )
        return cls(cell_seconds, bytes_per_halo_cell, exchanges, network)

    def predict(
        self, part_weight: FloatArray, pairs: PartPairs, *, speed: FloatArray, n_cells: int
    ) -> StepTime:
        """Predict one step.

        Parameters
        ----------
        part_weight : (n_parts,) float64
            Work of each part in any unit; the mean cell takes `cell_seconds`.
        pairs : PartPairs
            Which parts exchange how many cells. A message is as large as the larger of what is
            sent and received: both directions run at once.
        speed : (n_parts,) float64
            Relative speeds, any scale.
        n_cells : int
            Number of cells.
        """
        exchange = self.exchange_seconds(pairs, len(part_weight))
        return self.predict_from(part_weight, exchange, speed=speed, n_cells=n_cells)

    def predict_from(
        self, part_weight: FloatArray, exchange: FloatArray, *, speed: FloatArray, n_cells: int
    ) -> StepTime:
        """Predict one step from the seconds that each part spends on messages."""
        alone = self.cell_seconds * n_cells
        weight = float(part_weight.sum())
        relative = part_weight / weight if weight > 0 else np.zeros_like(part_weight)
        work = alone * relative / (speed / speed.mean())
        slowest = int(np.argmax(work + exchange))
        total = float(work[slowest] + exchange[slowest])
        speed_up = alone / total if total > 0 else float("nan")
        share = float(exchange[slowest]) / total if total > 0 else 0.0
        return StepTime(work, exchange, total, share, speed_up, speed_up / len(part_weight))

    def exchange_seconds(self, pairs: PartPairs, n_parts: int) -> FloatArray:
        """Add Hockney's time of the messages of each part."""
        cells = np.maximum(pairs.sent_cells, pairs.received_cells)
        seconds = self.network.latency + cells * (self.bytes_per_halo_cell / self.network.bandwidth)
        total = np.zeros(n_parts)
        np.add.at(total, pairs.part, seconds)
        return self.exchanges * total

    def to_json_dict(self) -> dict[str, object]:
        """Return the numbers, their source and what is left out, ready for JSON."""
        return {
            "network": self.network.name,
            "latency": self.network.latency,
            "bandwidth": self.network.bandwidth,
            "source": self.network.source,
            "cell_seconds": self.cell_seconds,
            "bytes_per_halo_cell": self.bytes_per_halo_cell,
            "exchanges": self.exchanges,
            "leaves_out": list(LEAVES_OUT),
        }
