"""The one home of h5py: open a file for reading, or create one, with errors of our own.

h5py loads on first use, so `import sfcpart` does not pay for it. Everything that can go wrong
while a file is open (it is cut short, a chunk is corrupt, the disk is full) leaves the
`with` block as one `FileError` line; errors of ours pass through unchanged.
"""

from __future__ import annotations

import errno
import math
import os
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any, Literal

from sfcpart.errors import FileError, SfcpartError

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Iterator
    from os import PathLike

__all__ = [
    "check_stored",
    "copy_hdf5",
    "create_hdf5",
    "extend_hdf5",
    "is_hdf5",
    "pack_hdf5",
    "read_hdf5",
    "read_text",
    "reserve_rows",
    "write_text",
]

_SIGNATURE = b"\x89HDF\r\n\x1a\n"
# A corrupt file shows itself in any of these, depending on which byte is wrong.
_READ_FAILURES = (OSError, RuntimeError, LookupError, ValueError, TypeError, AttributeError)
_WRITE_FAILURES = (OSError, RuntimeError)


@contextmanager
def read_hdf5(path: str | PathLike[str]) -> Iterator[Any]:
    """Open an HDF5 file for reading; yields the `h5py.File`.

    Parameters
    ----------
    path : path
        The file; it is opened with mode "r" and closed on leaving.

    Raises
    ------
    FileError
        If the file is missing, a folder, unreadable, no HDF5, cut short, locked by a writer,
        or if a dataset cannot be read while it is open.
    """
    place = Path(path)
    _check_readable(place)
    import h5py

    try:
        file = h5py.File(place, "r")
    except OSError as error:
        raise FileError(_why_not_opened(place, error)) from error
    with file, _mapped(place, "reading", _READ_FAILURES):
        yield file


@contextmanager
def create_hdf5(path: str | PathLike[str], *, track_order: bool = False) -> Iterator[Any]:
    """Create an HDF5 file (an existing one is replaced); yields the `h5py.File`.

    Writing beside and renaming is the caller's task (`sfcpart.files.parts.folder`).

    Parameters
    ----------
    path : path
        The file to create.
    track_order : bool
        Whether groups remember the order in which members were added.

    Raises
    ------
    FileError
        If the file cannot be created, or writing fails (disk full, quota).
    """
    with _written(Path(path), "w", track_order=track_order) as file:
        yield file


@contextmanager
def extend_hdf5(path: str | PathLike[str]) -> Iterator[Any]:
    """Open an HDF5 file that `create_hdf5` made, to add to it; yields the `h5py.File`.

    Raises
    ------
    FileError
        As `create_hdf5`.
    """
    with _written(Path(path), "r+") as file:
        yield file


@contextmanager
def _written(place: Path, mode: str, **options: Any) -> Iterator[Any]:
    """Open a file to write to, and raise what went wrong once it is closed."""
    import h5py

    try:
        sink = _PatientSink(place, "w+b" if mode == "w" else "r+b")
    except OSError as error:
        raise FileError(f"{place}: cannot be created: {_reason(error)}") from error
    try:
        with _mapped(place, "writing", _WRITE_FAILURES), h5py.File(sink, mode, **options) as file:
            yield file
    finally:
        sink.close()
        if sink.failure is not None:
            raise _not_written(place, sink.failure) from sink.failure


def reserve_rows(group: Any, name: str, shape: tuple[int, ...], dtype: Any) -> tuple[Any, int]:
    """Create a dataset whose rows lie one behind the other in the file, and are written later.

    Parameters
    ----------
    group : h5py.Group
    name : str
    shape : tuple of int
    dtype : dtype

    Returns
    -------
    dataset : h5py.Dataset
    offset : int
        Where its first byte lies in the file; -1 without rows.
    """
    import h5py

    plist = h5py.h5p.create(h5py.h5p.DATASET_CREATE)
    plist.set_alloc_time(h5py.h5d.ALLOC_TIME_EARLY)
    plist.set_fill_time(h5py.h5d.FILL_TIME_NEVER)
    dataset = group.create_dataset(name, shape=shape, dtype=dtype, dcpl=plist)
    offset = dataset.id.get_offset()
    return dataset, -1 if offset is None else int(offset)


def pack_hdf5(path: str | PathLike[str], names: Iterable[str], *, chunk_bytes: int) -> None:
    """Write a file again with some datasets packed by gzip and shuffle; in stretches of rows.

    Parameters
    ----------
    path : path
        Replaced in the end.
    names : iterable of str
        Datasets to pack, each with at least one row.
    chunk_bytes : int
        About the size of a chunk.

    Raises
    ------
    FileError
        As `read_hdf5` and `create_hdf5`.
    """
    beside = Path(path).with_name(f"{Path(path).name}.packed")
    chosen = frozenset(names)
    with read_hdf5(path) as old, create_hdf5(beside) as new:
        old.visititems(lambda name, item: _copy_item(name, item, new, chosen, chunk_bytes))
    beside.replace(path)


def _copy_item(name: str, item: Any, new: Any, chosen: frozenset[str], chunk_bytes: int) -> None:
    """Copy one group or dataset with its attributes, packed if it is chosen."""
    if not hasattr(item, "shape"):
        made = new.create_group(name)
    else:
        options: dict[str, Any] = {}
        row_bytes = max(1, item.dtype.itemsize * math.prod(item.shape[1:]))
        n_rows = item.shape[0] if item.shape else 1
        rows = max(1, min(n_rows, chunk_bytes // row_bytes))
        if name in chosen:
            options = {"chunks": (rows, *item.shape[1:]), "compression": "gzip"}
            options |= {"compression_opts": 1, "shuffle": True}
        made = new.create_dataset(name, shape=item.shape, dtype=item.dtype, **options)
        for at in range(0, n_rows, rows):
            made[at : at + rows] = item[at : at + rows]
    for key in item.attrs:
        kind = item.attrs.get_id(key)
        made.attrs.create(key, item.attrs[key], shape=kind.shape, dtype=kind.dtype)


@contextmanager
def copy_hdf5(path: str | PathLike[str], source: str | PathLike[str]) -> Iterator[Any]:
    """Create an HDF5 file with everything that another holds; yields the `h5py.File`, to add to.

    Parameters
    ----------
    path : path
        The file to create; not `source` itself.
    source : path

    Raises
    ------
    FileError
        As `read_hdf5` of the source and `create_hdf5` of the copy.
    """
    with read_hdf5(source) as old, create_hdf5(path) as new:
        for name, value in old.attrs.items():
            new.attrs[name] = value
        for name in old:
            old.copy(name, new, name)
        yield new


def is_hdf5(path: str | PathLike[str]) -> bool:
    """Tell by its first bytes whether a file is HDF5 (without loading h5py)."""
    with Path(path).open("rb") as file:
        return file.read(len(_SIGNATURE)) == _SIGNATURE


def check_stored(dataset: Any, path: str | PathLike[str]) -> None:
    """Check that a dataset's shape is backed by bytes in the file, before memory is taken.

    A damaged header can claim any shape, and a virtual dataset whose source file is gone reads
    as zeros without a word.

    Raises
    ------
    FileError
        If the dataset claims far more than the file stores, or a source is missing.
    """
    if dataset.is_virtual:
        folder = Path(path).resolve().parent
        for source in dataset.virtual_sources():
            if source.file_name != "." and not (folder / source.file_name).exists():
                raise FileError(f"{path}: {dataset.name} lies in {source.file_name}, not found")
        return
    if dataset.external:  # raw bytes in other files, which HDF5 itself looks for
        return
    stored = Path(path).stat().st_size
    claimed = dataset.size * dataset.dtype.itemsize
    # gzip cannot pack more than 1032 to 1 (its documentation says so).
    most = 1032 * stored if dataset.id.get_create_plist().get_nfilters() else stored
    if claimed > most:
        raise FileError(
            f"{path}: {dataset.name} claims {claimed} bytes, but the file has {stored}; "
            f"it is damaged"
        )


def write_text(group: Any, name: str, text: str) -> None:
    """Write text as an attribute of fixed length.

    Text of variable length lies in a heap, and the HDF5 library never returns from some heaps
    with a wrong byte.
    """
    import h5py

    stored = text.encode("utf-8")
    group.attrs.create(name, stored, dtype=h5py.string_dtype("utf-8", max(1, len(stored))))


def read_text(group: Any, name: str) -> str:
    """Read an attribute that `write_text` wrote.

    Raises
    ------
    FileError
        If it is no text of fixed length.
    """
    attribute = group.attrs.get_id(name)
    if attribute.dtype.kind != "S" or attribute.shape != ():
        raise FileError(f"{group.file.filename}: attribute {name} is no text of fixed length")
    return bytes(group.attrs[name]).decode("utf-8", "replace")


class _PatientSink:
    """A file for HDF5 to write to that keeps the first failure for later.

    The HDF5 library crashes the process if a write fails while it closes a file (a full disk),
    so it is not told; `create_hdf5` raises when the file is closed. Writing through Python is no
    slower: large slices come in one call (40 MB: 0.02 s).
    """

    def __init__(self, place: Path, mode: Literal["w+b", "r+b"]) -> None:
        self._file = place.open(mode, buffering=0)
        self._end = self._file.seek(0, os.SEEK_END)
        self.failure: OSError | None = None

    def seek(self, offset: int, whence: int = os.SEEK_SET) -> int:
        """Move; the end is where it would be had every write succeeded."""
        if whence == os.SEEK_END:
            return self._file.seek(self._end + offset)
        return self._file.seek(offset, whence)

    def tell(self) -> int:
        """Return the position."""
        return self._file.tell()

    def read(self, size: int = -1) -> bytes:
        """Read bytes (h5py knows a file by this method)."""
        return self._file.read(size)

    def readinto(self, buffer: Any) -> int:
        """Fill a buffer."""
        return self._file.readinto(buffer)

    def write(self, data: Any) -> int:
        """Write all bytes, or keep the failure and pretend."""
        left = memoryview(data).cast("B")
        self._end = max(self._end, self._file.tell() + len(left))
        self._quietly(lambda: self._write_all(left))
        return len(left)

    def truncate(self, size: int) -> int:
        """Set the length."""
        self._end = size
        self._quietly(lambda: self._file.truncate(size))
        return size

    def flush(self) -> None:
        """Do nothing: there is no buffer."""

    def close(self) -> None:
        """Close the file."""
        self._quietly(self._file.close)

    def _write_all(self, left: memoryview) -> None:
        """Write until nothing is left: the system may take less at a time."""
        while len(left):
            left = left[self._file.write(left) :]

    def _quietly(self, act: Callable[[], Any]) -> None:
        """Act unless something failed before, and keep a failure."""
        if self.failure is None:
            try:
                act()
            except OSError as error:
                self.failure = error


def _not_written(place: Path, error: OSError) -> FileError:
    """Say in one line why rows could not be written."""
    return FileError(f"{place}: writing HDF5 failed: {_reason(error)}")


def _check_readable(place: Path) -> None:
    """Raise one line for everything the file system itself can say no to."""
    try:
        if place.is_dir():
            raise FileError(f"{place}: is a folder; wanted an HDF5 file")
        if not is_hdf5(place):
            raise FileError(f"{place}: is no HDF5 file (its first bytes are not HDF5's)")
    except FileError:
        raise
    except OSError as error:
        raise FileError(f"{place}: cannot be read: {_reason(error)}") from error


def _why_not_opened(place: Path, error: OSError) -> str:
    """Put the library's refusal into one line that says what to do."""
    text = " ".join(str(error).split())
    if error.errno == errno.EAGAIN or "unable to lock file" in text:
        return f"{place}: is locked by a program that writes it; wait for it, then try again"
    if "truncated" in text or "eof" in text.lower():
        return f"{place}: the HDF5 file is cut short; copy or write it again ({text})"
    return f"{place}: the HDF5 file is damaged and cannot be opened ({text})"


@contextmanager
def _mapped(place: Path, doing: str, failures: tuple[type[Exception], ...]) -> Iterator[None]:
    """Turn what h5py raises inside the block into a FileError that names the file."""
    try:
        yield
    except (SfcpartError, MemoryError):
        raise
    except failures as error:
        raise FileError(f"{place}: {doing} HDF5 failed: {_reason(error)}") from error


def _reason(error: BaseException) -> str:
    """Return the message of an exception in one line."""
    number = getattr(error, "errno", None)
    if number:
        return os.strerror(number)
    return " ".join(str(error).split()).strip("'\"") or type(error).__name__
