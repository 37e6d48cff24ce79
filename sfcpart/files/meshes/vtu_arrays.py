"""Decode the data arrays of VTK XML files: text, base64 or raw, packed with zlib or LZMA or not.

Sizes claimed in headers are checked against the bytes that are there before memory is taken.
Source: VTK file formats, "XML file formats", appended and compressed data.
"""

from __future__ import annotations

import binascii
import lzma
import warnings
import zlib
from dataclasses import dataclass
from itertools import accumulate
from typing import TYPE_CHECKING

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.errors import FileError
from sfcpart.kernels.threads import run_ranges

if TYPE_CHECKING:
    from collections.abc import Mapping
    from xml.etree.ElementTree import Element

__all__ = ["ArrayDecoder"]

_TYPES: Mapping[str, str] = {
    "Int8": "i1",
    "Int16": "i2",
    "Int32": "i4",
    "Int64": "i8",
    "UInt8": "u1",
    "UInt16": "u2",
    "UInt32": "u4",
    "UInt64": "u8",
    "Float32": "f4",
    "Float64": "f8",
}
# zlib packs at most 1032 to 1 (its documentation); LZMA more, but no mesh comes near.
_MOST_PACKED = 1100


@dataclass(frozen=True)
class ArrayDecoder:
    """How this file stores arrays.

    Attributes
    ----------
    order : str
        "<" or ">".
    header : str
        numpy's code of the integers in headers, "u4" or "u8".
    compressor : str
        Name of the compressor, "" without one.
    appended : memoryview
        Content of AppendedData, from behind its underscore.
    is_raw : bool
        Whether appended content is raw bytes, not base64.
    """

    order: str
    header: str
    compressor: str
    appended: memoryview
    is_raw: bool

    def decode(self, element: Element) -> Array | None:
        """Return the numbers of one DataArray, (n,) or (n, components); None if it holds text.

        Raises
        ------
        FileError
            If the array is damaged or of a form that is not known.
        """
        name, kind = element.get("Name", "Points"), element.get("type", "")
        if kind not in _TYPES:
            if kind in ("String", "Bit"):
                return None
            raise FileError(f"array {name!r} has unknown type {kind!r}")
        dtype = np.dtype(self.order + _TYPES[kind])
        try:
            flat = self._flat(element, dtype)
        except (FileError, ValueError, zlib.error, lzma.LZMAError, EOFError) as error:
            raise FileError(f"array {name!r} is damaged or cut short: {error}") from error
        width = element.get("NumberOfComponents", "1") or "1"
        if not width.isdigit() or int(width) < 1 or len(flat) % int(width):
            raise FileError(f"array {name!r} has {len(flat)} numbers, not a multiple of {width}")
        native = flat.astype(dtype.newbyteorder("="), copy=False)
        return native.reshape(-1, int(width)) if int(width) > 1 else native

    def _flat(self, element: Element, dtype: np.dtype[np.generic]) -> Array:
        """Return the numbers in one row."""
        form = element.get("format", "ascii")
        if form == "ascii":
            return _from_text(element.text or "", dtype)
        if form == "binary":
            text = (element.text or "").strip().encode("ascii", "replace")
            return np.frombuffer(self._unpack(_Base64(memoryview(text))), dtype)
        if form == "appended":
            offset = int(element.get("offset", "0"))
            if not 0 <= offset < max(len(self.appended), 1):
                raise FileError(f"offset {offset} lies outside the appended data")
            rest = self.appended[offset:]
            return np.frombuffer(self._unpack(_Raw(rest) if self.is_raw else _Base64(rest)), dtype)
        raise FileError(f"format {form!r} is not known")

    def _unpack(self, source: _Raw | _Base64) -> bytes | bytearray | memoryview:
        """Read header and content."""
        item = np.dtype(self.order + self.header)
        count = int(np.frombuffer(source.peek(item.itemsize), item)[0])
        if not self.compressor:
            return source.content(item.itemsize, count)
        if count == 0:
            return b""
        if count > source.n_bytes:
            raise FileError(f"it claims {count} blocks")
        head = np.frombuffer(source.unit((3 + count) * item.itemsize), item).astype(np.uint64)
        sizes = [int(size) for size in head[3:]]
        block, last = int(head[1]), int(head[2]) or int(head[1])
        packed = source.unit(sum(sizes))
        total = (count - 1) * block + last
        if total > _MOST_PACKED * max(len(packed), 64):
            raise FileError(f"it claims {total} bytes, packed in {len(packed)}")
        return self._inflate(packed, sizes, block, total)

    def _inflate(
        self, packed: bytes | memoryview, sizes: list[int], block: int, total: int
    ) -> bytearray:
        """Unpack the blocks, several threads at once: zlib and lzma let go of the interpreter."""
        out = bytearray(total)
        room = memoryview(out)
        place = [0, *accumulate(sizes)]

        def unpack(start: int, stop: int) -> None:
            for k in range(start, stop):
                most = min(block, total - k * block)
                part = packed[place[k] : place[k + 1]]
                piece = (
                    zlib.decompressobj().decompress(part, max(most, 1))
                    if self.compressor == "vtkZLibDataCompressor"
                    else lzma.LZMADecompressor().decompress(part, max(most, 1))
                )
                if len(piece) != most:
                    raise FileError(f"a block has {len(piece)} bytes; wanted {most}")
                room[k * block : k * block + most] = piece

        run_ranges(unpack, len(sizes), smallest=16)
        return out


class _Raw:
    """Raw bytes, read from the front."""

    def __init__(self, content: memoryview) -> None:
        self.rest = content

    @property
    def n_bytes(self) -> int:
        """Bytes that are left."""
        return len(self.rest)

    def peek(self, size: int) -> memoryview:
        """Look at the first bytes."""
        if size > len(self.rest):
            raise FileError(f"{size} bytes wanted, {len(self.rest)} left")
        return self.rest[:size]

    def unit(self, size: int) -> memoryview:
        """Take the next bytes."""
        unit = self.peek(size)
        self.rest = self.rest[size:]
        return unit

    def content(self, header: int, size: int) -> memoryview:
        """Take what follows a header that gives its size."""
        self.unit(header)
        return self.unit(size)


class _Base64:
    """Base64 text, read unit by unit; a unit is what was encoded in one go."""

    def __init__(self, text: memoryview) -> None:
        self.rest = text

    @property
    def n_bytes(self) -> int:
        """Bytes that are left, about."""
        return len(self.rest) * 3 // 4

    def peek(self, size: int) -> bytes:
        """Decode the first bytes."""
        return self._decoded(size)[:size]

    def unit(self, size: int) -> bytes:
        """Take the next unit, of `size` bytes."""
        unit = self._decoded(size)[:size]
        if len(unit) != size:
            raise FileError(f"{size} bytes wanted, {len(unit)} there")
        self.rest = self.rest[_n_letters(size) :]
        return unit

    def content(self, header: int, size: int) -> bytes:
        """Take what follows a header, be it a unit of its own or not."""
        if b"=" in bytes(self.rest[: _n_letters(header)]):
            self.unit(header)
            return self.unit(size)
        return self.unit(header + size)[header:]

    def _decoded(self, size: int) -> bytes:
        """Decode the letters that carry `size` bytes."""
        n_letters = _n_letters(size)
        if n_letters > len(self.rest):
            raise FileError(f"{size} bytes wanted, {self.n_bytes} left")
        return binascii.a2b_base64(self.rest[:n_letters])


def _n_letters(size: int) -> int:
    """Return the length of `size` bytes in base64."""
    return -(-size // 3) * 4


def _from_text(text: str, dtype: np.dtype[np.generic]) -> Array:
    """Read numbers from text; anything else is an error."""
    if not text.strip():
        return np.zeros(0, dtype)
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        try:
            return np.fromstring(text, dtype=dtype.newbyteorder("="), sep=" ")
        except DeprecationWarning:
            raise FileError("it holds something else than numbers") from None
