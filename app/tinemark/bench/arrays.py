"""Tables from NumPy's own files: no pickles, and no header is believed before it fits the file."""

from __future__ import annotations

import hashlib
import io
import math
import zipfile
from pathlib import Path
from tokenize import TokenError
from typing import Any, BinaryIO

import numpy as np
from numpy.typing import NDArray

from tinemark.bench.errors import BenchFileError
from tinemark.bench.sweep import BenchSource
from tinemark.bench.table import MOST_BYTES, MOST_VALUES, Table

MOST_MEMBERS = 200
MOST_RATIO = 1100
"""Deflate packs at most about a thousandfold: a member that claims more lies."""


def read_array_table(path: Path) -> Table:
    """Read a ``.npy`` or ``.npz`` file as a table.

    A two-dimensional array holds a row a line; a structured one names its columns; the arrays of an archive
    are columns of one length, each named by its entry, or a single array.

    Raises
    ------
    BenchFileError
        It cannot be read, holds Python objects, or its header does not fit its size.
    """
    file = path.name
    try:
        size = path.stat().st_size
        if size > MOST_BYTES:
            raise BenchFileError(
                f"is larger than {MOST_BYTES // 2**30} GiB", file=file, what_to_do="split it"
            )
        digest = hashlib.sha256()
        with path.open("rb") as handle:
            while block := handle.read(2**22):
                digest.update(block)
        source = BenchSource(file, size, digest.hexdigest())
        with path.open("rb") as handle:
            if path.suffix.lower() == ".npz":
                named = _archive(handle, file)
            else:
                named = _columns("column", _array(handle, size, file, ""), file)
    except OSError as error:
        reason = (error.strerror or str(error)).lower()
        raise BenchFileError(
            f"cannot be read ({reason})", file=str(path), what_to_do="check the path"
        ) from error
    lengths = {name: len(values) for name, values in named.items()}
    if len(set(lengths.values())) > 1:
        told = ", ".join(f"{name} {length}" for name, length in list(lengths.items())[:6])
        raise BenchFileError(
            f"its arrays differ in length ({told})", file=file, what_to_do="give columns of one length"
        )
    if not named or not next(iter(lengths.values())):
        raise BenchFileError("is empty", file=file, what_to_do="choose the file that holds the sweep")
    values = np.column_stack(list(named.values()))
    kept = values[~np.isnan(values).all(axis=1)]
    names = tuple(named)
    kind = "an archive of arrays" if path.suffix.lower() == ".npz" else "an array"
    words = f"{len(names)} column{'s' if len(names) > 1 else ''} from {kind}"
    return Table(names, ("",) * len(names), kept, (), len(values) - len(kept), words, source)


def _archive(handle: BinaryIO, file: str) -> dict[str, NDArray[np.float64]]:
    try:
        archive = zipfile.ZipFile(handle)
    except (zipfile.BadZipFile, ValueError) as error:
        raise BenchFileError("is a broken archive", file=file, what_to_do="save it again") from error
    with archive:
        members = archive.infolist()
        if len(members) > MOST_MEMBERS:
            raise BenchFileError(
                f"holds more than {MOST_MEMBERS} arrays", file=file, what_to_do="keep those of the sweep"
            )
        total = 0
        found: dict[str, NDArray[np.float64]] = {}
        for member in members:
            total += member.file_size
            if not member.filename.endswith(".npy") or "/" in member.filename or "\\" in member.filename:
                raise BenchFileError(
                    f'holds "{member.filename[:60]}", which is no array',
                    file=file,
                    what_to_do="keep arrays only",
                )
            if member.file_size > MOST_RATIO * max(member.compress_size, 1) or total > MOST_BYTES:
                raise BenchFileError(
                    "unpacks to more than it could hold", file=file, what_to_do="save it again, uncompressed"
                )
            try:
                data = archive.read(member)
            except (
                zipfile.BadZipFile,
                NotImplementedError,
                RuntimeError,
                EOFError,
                OSError,
                ValueError,
            ) as error:
                raise BenchFileError(
                    f'its array "{member.filename[:60]}" is broken', file=file, what_to_do="save it again"
                ) from error
            name = member.filename.removesuffix(".npy")
            array = _array(io.BytesIO(data), len(data), file, name)
            found.update(
                {name: _flat(array)}
                if array.ndim == 1 and not array.dtype.names
                else _columns(name, array, file)
            )
    return found


def _array(handle: BinaryIO, size: int, file: str, name: str) -> NDArray[Any]:
    """An array, its header checked against what is there."""
    where = f'the array "{name}"' if name else "the array"
    try:
        version = np.lib.format.read_magic(handle)
        readers = {
            (1, 0): np.lib.format.read_array_header_1_0,
            (2, 0): np.lib.format.read_array_header_2_0,
        }
        if version not in readers:
            raise BenchFileError(f"{where} is of an unknown version", file=file, what_to_do="save it again")
        shape, fortran, dtype = readers[version](handle)
    except BenchFileError:
        raise
    except (ValueError, EOFError, SyntaxError, TypeError, RecursionError, MemoryError, TokenError) as error:
        raise BenchFileError(
            f"{where} has no header that can be read", file=file, what_to_do="save it with numpy.save"
        ) from error
    if dtype.hasobject:
        raise BenchFileError(
            f"{where} holds Python objects, which are never read", file=file, what_to_do="save plain numbers"
        )
    parts = [dtype[part] for part in dtype.names] if dtype.names else [dtype]
    if any(part.kind not in "fiub" or part.shape for part in parts):
        raise BenchFileError(f"{where} holds no real numbers", file=file, what_to_do="save plain numbers")
    if any(length < 0 for length in shape) or len(shape) > 2:
        raise BenchFileError(f"{where} has {len(shape)} axes", file=file, what_to_do="give one or two")
    count = math.prod(shape)
    if count * dtype.itemsize > size - handle.tell() or count * len(parts) > MOST_VALUES:
        raise BenchFileError(
            f"{where} claims {count} entries, more than the file holds or than can be read",
            file=file,
            what_to_do="save it again",
        )
    data = handle.read(count * dtype.itemsize)
    if len(data) != count * dtype.itemsize:
        raise BenchFileError(f"{where} ends early", file=file, what_to_do="save it again")
    return np.frombuffer(data, dtype).reshape(shape, order="F" if fortran else "C")


def _columns(name: str, array: NDArray[Any], file: str) -> dict[str, NDArray[np.float64]]:
    if array.ndim == 0:
        raise BenchFileError(
            "holds a single number", file=file, what_to_do="choose the file that holds the sweep"
        )
    if array.dtype.names:
        return {part: _flat(array[part]) for part in array.dtype.names}
    if array.ndim == 1:
        return {f"{name} 1": _flat(array)}
    if array.shape[1] > 4096:
        raise BenchFileError(
            f"has {array.shape[1]} columns", file=file, what_to_do="give settings as rows, samples as columns"
        )
    return {f"{name} {number + 1}": _flat(array[:, number]) for number in range(array.shape[1])}


def _flat(array: NDArray[Any]) -> NDArray[np.float64]:
    flat = np.ravel(array).astype(np.float64)
    flat[~np.isfinite(flat)] = np.nan
    return flat
