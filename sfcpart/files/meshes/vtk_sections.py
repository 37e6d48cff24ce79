"""Cut a legacy VTK file into its sections: arrays by name, nothing interpreted yet.

Counts claimed in the text are checked against the bytes that are left before memory is taken.
Source: VTK file formats, "Simple legacy formats", versions 1.0 to 5.1.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING
from urllib.parse import unquote

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.errors import FileError

if TYPE_CHECKING:
    from collections.abc import Mapping
    from pathlib import Path
    from typing import BinaryIO

__all__ = ["CellArray", "LegacyFile", "read_sections"]

_TYPES: Mapping[str, str] = {
    "unsigned_char": "u1",
    "char": "i1",
    "signed_char": "i1",
    "unsigned_short": "u2",
    "short": "i2",
    "unsigned_int": "u4",
    "int": "i4",
    "unsigned_long": "u8",
    "long": "i8",
    "float": "f4",
    "double": "f8",
    "vtkidtype": "i4",
    "vtktypeint64": "i8",
    "vtktypeuint64": "u8",
    "vtktypeint32": "i4",
    "vtktypeuint32": "u4",
    "vtktypeint16": "i2",
    "vtktypeuint16": "u2",
    "vtktypeint8": "i1",
    "vtktypeuint8": "u1",
}
_WIDTH = {"VECTORS": 3, "NORMALS": 3, "TENSORS": 9, "TENSORS6": 6, "GLOBAL_IDS": 1}
_CELL_ARRAYS = ("CELLS", "VERTICES", "LINES", "POLYGONS", "TRIANGLE_STRIPS")


@dataclass
class CellArray:
    """Rows of point ids, as (offsets, ids) in version 5, as counted rows in `ids` before."""

    n_rows: int
    offsets: Array | None
    ids: Array


@dataclass
class LegacyFile:
    """What a legacy file holds."""

    dataset: str = ""
    points: Array | None = None
    shape: tuple[int, ...] = ()
    axes: dict[str, Array] = field(default_factory=dict)
    types: Array | None = None
    cells: dict[str, CellArray] = field(default_factory=dict)
    cell_fields: dict[str, Array] = field(default_factory=dict)
    point_fields: dict[str, Array] = field(default_factory=dict)


def read_sections(path: Path) -> LegacyFile:
    """Read a legacy file, whatever its dataset.

    Parameters
    ----------
    path : Path

    Returns
    -------
    LegacyFile

    Raises
    ------
    FileError
        If the file is cut short or damaged; the message does not name the file.
    """
    with path.open("rb") as file:
        reader = _Sections(file, path.stat().st_size)
        reader.read_all()
    return reader.found


class _Sections:
    """A legacy file that is being read from the front."""

    def __init__(self, file: BinaryIO, size: int) -> None:
        self.file, self.size = file, size
        self.found = LegacyFile()
        version = file.readline(256).split()[-1:]
        try:
            self.major = int((version or [b""])[0].split(b".")[0])
        except ValueError:
            raise FileError("has no version in its first line") from None
        file.readline(1024)
        mode = file.readline(256).strip().upper()
        if mode not in (b"ASCII", b"BINARY"):
            raise FileError(f"is neither ASCII nor BINARY in its third line, but {mode[:20]!r}")
        self.is_text = mode == b"ASCII"
        self.n_rows = 0
        self.fields: dict[str, Array] = {}

    def read_all(self) -> None:
        """Read section after section."""
        while words := self.words():
            name = words[0].upper()
            if name in ("POINT_DATA", "CELL_DATA"):
                self.n_rows = self.count(words, 1)
                is_cell = name == "CELL_DATA"
                self.fields = self.found.cell_fields if is_cell else self.found.point_fields
            elif not self.geometry(name, words):
                self.attribute(name, words)

    def geometry(self, name: str, words: list[str]) -> bool:
        """Read points and cells, or what a structured grid has; tell whether it was that."""
        found = self.found
        if name == "DATASET":
            found.dataset = self.word(words, 1).upper()
        elif name == "POINTS":
            flat = self.numbers(3 * self.count(words, 1), self.word(words, 2))
            found.points = flat.reshape(-1, 3)
        elif name == "DIMENSIONS":
            found.shape = tuple(self.count(words, place) for place in (1, 2, 3))
        elif name in ("ORIGIN", "SPACING", "ASPECT_RATIO"):
            found.axes[name[0]] = self.reals(words)
        elif name in ("X_COORDINATES", "Y_COORDINATES", "Z_COORDINATES"):
            found.axes[name[0]] = self.numbers(self.count(words, 1), self.word(words, 2))
        elif name in _CELL_ARRAYS:
            found.cells[name] = self.cell_array(words)
        elif name == "CELL_TYPES":
            found.types = self.numbers(self.count(words, 1), "int")
        else:
            return False
        return True

    def words(self) -> list[str]:
        """Return the words of the next line that is not blank; none at the end of the file."""
        while line := self.file.readline(1 << 16):
            if line.strip():
                return line.decode("utf-8", "replace").split()
        return []

    def word(self, words: list[str], place: int) -> str:
        """Return a word that must be there."""
        if place >= len(words):
            raise FileError(f"the line {' '.join(words)[:60]!r} is cut short")
        return words[place]

    def count(self, words: list[str], place: int) -> int:
        """Return a count."""
        text = self.word(words, place)
        if not text.isascii() or not text.isdigit():
            raise FileError(f"the line {' '.join(words)[:60]!r} has no count where one is wanted")
        return int(text)

    def reals(self, words: list[str]) -> Array:
        """Return the three reals on a line."""
        try:
            return np.array([float(self.word(words, place)) for place in (1, 2, 3)])
        except ValueError:
            raise FileError(f"the line {' '.join(words)[:60]!r} wants three numbers") from None

    def numbers(self, count: int, kind: str) -> Array:
        """Read `count` numbers of a VTK type."""
        left = self.size - self.file.tell()
        if kind.lower() == "bit":
            return self.bits(count)
        code = _TYPES.get(kind.lower())
        if code is None:
            raise FileError(f"holds numbers of unknown type {kind[:40]!r}")
        dtype = np.dtype(code if self.is_text else f">{code}")
        if count * (2 if self.is_text else dtype.itemsize) > left + 1:
            raise FileError(f"claims {count} numbers, but {left} bytes are left; it is cut short")
        try:
            flat = np.fromfile(self.file, dtype, count, sep=" " if self.is_text else "")
        except (ValueError, DeprecationWarning):  # the latter in older numpy, if made an error
            raise FileError(f"has something else where {count} numbers are wanted") from None
        if len(flat) != count:
            raise FileError(f"claims {count} numbers, but {len(flat)} could be read")
        native: Array = flat.astype(dtype.newbyteorder("="), copy=False)
        return native

    def bits(self, count: int) -> Array:
        """Read numbers of one bit."""
        if self.is_text:
            return self.numbers(count, "unsigned_char")
        packed = self.numbers(-(-count // 8), "unsigned_char")
        return np.unpackbits(packed)[:count]

    def cell_array(self, words: list[str]) -> CellArray:
        """Read rows of point ids."""
        first, second = self.count(words, 1), self.count(words, 2)
        if self.major < 5:
            return CellArray(first, None, self.numbers(second, "int"))
        arrays = []
        for name, count in (("OFFSETS", first), ("CONNECTIVITY", second)):
            head = self.words()
            if not head or head[0].upper() != name:
                raise FileError(f"has no {name} where these are wanted")
            arrays.append(self.numbers(count, self.word(head, 1)))
        return CellArray(max(first - 1, 0), *arrays)

    def attribute(self, name: str, words: list[str]) -> None:
        """Read one field, or skip what holds none."""
        if name == "METADATA":
            while (line := self.file.readline(1 << 16)) and line.strip():
                pass
        elif name == "FIELD":
            self.field_arrays(self.count(words, 2))
        elif name == "SCALARS":
            self.scalars(words)
        elif name == "LOOKUP_TABLE":
            self.numbers(4 * self.count(words, 2), "float" if self.is_text else "unsigned_char")
        elif name == "COLOR_SCALARS":
            kind = "float" if self.is_text else "unsigned_char"
            self.keep(words, self.count(words, 2), kind)
        elif name == "TEXTURE_COORDINATES":
            self.keep(words, self.count(words, 2), self.word(words, 3))
        elif name in _WIDTH:
            self.keep(words, _WIDTH[name], self.word(words, 2))
        else:
            raise FileError(f"has an unknown section {name[:40]!r}; it is damaged")

    def keep(self, words: list[str], width: int, kind: str) -> None:
        """Read a field with one row a cell or point."""
        flat = self.numbers(self.n_rows * width, kind)
        name = unquote(self.word(words, 1))
        self.fields[name] = flat.reshape(self.n_rows, width) if width > 1 else flat

    def scalars(self, words: list[str]) -> None:
        """Read a field of scalars; the line LOOKUP_TABLE behind its name may be missing."""
        width = self.count(words, 3) if len(words) > 3 else 1
        place = self.file.tell()
        line = self.words()
        if not line or line[0].upper() != "LOOKUP_TABLE":
            self.file.seek(place)
        self.keep(words, width, self.word(words, 2))

    def field_arrays(self, n_arrays: int) -> None:
        """Read a group of arrays; those with one row a cell or point are kept."""
        for _ in range(n_arrays):
            words = self.words()
            if words and words[0].upper() == "METADATA":
                self.attribute("METADATA", words)
                words = self.words()
            width, rows, kind = self.count(words, 1), self.count(words, 2), self.word(words, 3)
            if kind.lower() in ("string", "utf8_string"):
                self.skip_strings(width * rows)
                continue
            flat = self.numbers(width * rows, kind)
            if rows == self.n_rows and self.found.dataset:
                self.fields[unquote(words[0])] = flat.reshape(rows, width) if width > 1 else flat

    def skip_strings(self, count: int) -> None:
        """Skip text values: a line each, or a length of 1 to 8 bytes and the letters."""
        if count > self.size - self.file.tell():
            raise FileError(f"claims {count} texts; it is cut short")
        for _ in range(count):
            if self.is_text:
                self.file.readline()
                continue
            first = self.file.read(1)
            if not first:
                raise FileError("a text is cut short")
            more = (7, 3, 1, 0)[first[0] >> 6]
            low = int.from_bytes(bytes([first[0] & 63]) + self.file.read(more), "big")
            self.file.seek(low, 1)
