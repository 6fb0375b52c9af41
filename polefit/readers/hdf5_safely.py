"""Reading HDF5 that may be damaged or hostile: nothing is followed, trusted or unpacked blindly."""

from __future__ import annotations

import io
from collections.abc import Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any

import numpy as np

from polefit.errors import FormatError, PolefitError
from polefit.readers.large_files import Content, release
from polefit.responses import ComplexArray, FloatArray

if TYPE_CHECKING:
    import h5py

SIGNATURE = b"\x89HDF\r\n\x1a\n"
_AGAIN = "write the file again"
_LAYOUT = "write the layout told in polefit.readers.hdf5"
# Compression of real responses saves little; a tiny file that declares much more is a trap.
_MOST_COMPRESSION = 100
_SLACK_BYTES = 4096


def is_hdf5(content: Content) -> bool:
    """Whether the signature stands at byte 0, 512, 1024, 2048 …, as the format demands."""
    at = 0
    while at + len(SIGNATURE) <= len(content):
        if bytes(content[at : at + len(SIGNATURE)]) == SIGNATURE:
            return True
        at = 2 * at or 512
    return False


class _Bytes(io.RawIOBase):
    """The bytes of a file as a file object."""

    def __init__(self, content: Content) -> None:
        self._content = content
        self._at = 0

    def readable(self) -> bool:
        return True

    def seekable(self) -> bool:
        return True

    def tell(self) -> int:
        return self._at

    def seek(self, offset: int, whence: int = io.SEEK_SET) -> int:
        base = {io.SEEK_SET: 0, io.SEEK_CUR: self._at, io.SEEK_END: len(self._content)}[whence]
        self._at = max(0, base + offset)
        return self._at

    def readinto(self, buffer: Any) -> int:
        piece = self._content[self._at : self._at + len(buffer)]
        buffer[: len(piece)] = piece
        release(self._content, self._at, self._at + len(piece))
        self._at += len(piece)
        return len(piece)


@contextmanager
def opened(content: Content) -> Iterator[h5py.File]:
    """Open the bytes of a file, read-only and without touching the file system."""
    import h5py

    with h5py.File(_Bytes(content), "r") as file:
        yield file


@contextmanager
def damage_is_told() -> Iterator[None]:
    """Turn whatever the HDF5 library raises on damaged content into a FormatError."""
    try:
        yield
    except PolefitError:
        raise
    except Exception as error:  # the library reports damage through a dozen types
        what = f"a damaged HDF5 file ({type(error).__name__})"
        raise FormatError(what, _AGAIN) from error


def child_group(group: h5py.Group, name: str) -> h5py.Group:
    """Return the subgroup `name`, which must stand in the file itself."""
    import h5py

    return _child(group, name, h5py.Group, "group")


def child_dataset(group: h5py.Group, name: str) -> h5py.Dataset:
    """Return the dataset `name`, whose numbers must stand in the file itself."""
    import h5py

    dataset = _child(group, name, h5py.Dataset, "dataset")
    if dataset.external or dataset.is_virtual:
        raise FormatError(f"{dataset.name}: numbers kept in another file", _AGAIN)
    if dataset.shape is None:
        raise FormatError(f"{dataset.name}: empty", _LAYOUT)
    stored = dataset.id.get_storage_size()
    if dataset.nbytes > _MOST_COMPRESSION * stored + _SLACK_BYTES:
        what = f"{dataset.name}: declares {dataset.nbytes} bytes but stores {stored}"
        raise FormatError(what, _AGAIN)
    return dataset


def _child(group: h5py.Group, name: str, kind: type, word: str) -> Any:
    import h5py

    link = group.get(name, getlink=True)
    where = f"{group.name.rstrip('/')}/{name}"
    if link is None:
        raise FormatError(f"no {word} {where}", _LAYOUT)
    if not isinstance(link, h5py.HardLink):
        raise FormatError(f"{where} is a link to another place", _AGAIN)
    child = group[name]
    if not isinstance(child, kind):
        raise FormatError(f"{where} is not a {word}", _LAYOUT)
    return child


def float_array(dataset: h5py.Dataset, *, dimensions: int) -> FloatArray:
    """Read real numbers of any width and byte order.

    Parameters
    ----------
    dataset : h5py.Dataset
        Of integers or floats.
    dimensions : int
        How many axes it must have.

    Returns
    -------
    float ndarray
        Read-only.

    Raises
    ------
    FormatError
        If the type or the number of axes is another one.
    """
    _check_axes(dataset, dimensions)
    if dataset.dtype.kind not in "fiu":
        raise FormatError(f"{dataset.name}: {dataset.dtype}, not real numbers", _LAYOUT)
    found = np.asarray(dataset[()], dtype=np.float64)
    found.flags.writeable = False
    return found


def complex_array(dataset: h5py.Dataset) -> ComplexArray:
    """Read an (N, K) table of complex numbers, stored in any of the three usual ways.

    Parameters
    ----------
    dataset : h5py.Dataset
        Complex as a compound {r, i} or {real, imag}, or as HDF5's own class.

    Returns
    -------
    (N, K) complex ndarray
        Read-only.

    Raises
    ------
    FormatError
        If the type or the number of axes is another one.
    """
    _check_axes(dataset, 2)
    names = dataset.dtype.names
    if dataset.dtype.kind == "c":
        found = np.asarray(dataset[()], dtype=np.complex128)
    elif names in (("real", "imag"), ("r", "i")) and all(
        dataset.dtype[part].kind in "fiu" for part in names
    ):
        pairs = dataset[()]
        found = np.empty(pairs.shape, dtype=np.complex128)
        found.real, found.imag = pairs[names[0]], pairs[names[1]]
    else:
        raise FormatError(f"{dataset.name}: {dataset.dtype}, not complex numbers", _LAYOUT)
    found.flags.writeable = False
    return found


def text_array(dataset: h5py.Dataset) -> np.ndarray:
    """Read an array of text of fixed or variable length."""
    import h5py

    if h5py.check_string_dtype(dataset.dtype) is None:
        raise FormatError(f"{dataset.name}: {dataset.dtype}, not text", _LAYOUT)
    raw = np.asarray(dataset[()], dtype=object)
    decoded = [text(item, dataset.name) for item in raw.ravel()]
    return np.array(decoded, dtype=object).reshape(raw.shape)


def text(value: Any, name: str) -> str:
    """Take an attribute or an element as text.

    Parameters
    ----------
    value : str or bytes
        As h5py gives it.
    name : str
        For the error.

    Returns
    -------
    str

    Raises
    ------
    FormatError
        If it is something else, or not UTF-8.
    """
    if isinstance(value, np.ndarray) and value.size == 1:
        value = value.ravel()[0]
    if isinstance(value, str):
        value = value.encode("utf-8", "surrogateescape")
    if isinstance(value, bytes):
        try:
            return value.decode("utf-8")
        except UnicodeDecodeError:
            raise FormatError(f"{name}: text that is not UTF-8", _AGAIN) from None
    raise FormatError(f"{name}: {type(value).__name__}, not text", _LAYOUT)


def number(place: h5py.HLObject, name: str) -> float:
    """Take an attribute as one number.

    Parameters
    ----------
    place : h5py.Group or h5py.File
        Whose attribute.
    name : str
        Which one.

    Returns
    -------
    float

    Raises
    ------
    FormatError
        If it is missing or something else.
    """
    value = np.asarray(place.attrs[name]) if name in place.attrs else np.zeros(0)
    if value.size != 1 or value.dtype.kind not in "fiub":
        raise FormatError(f"{place.name}: attribute {name!r} is not one number", _LAYOUT)
    return float(value.ravel()[0])


def _check_axes(dataset: h5py.Dataset, dimensions: int) -> None:
    if len(dataset.shape) != dimensions:
        what = f"{dataset.name}: {len(dataset.shape)} axes instead of {dimensions}"
        raise FormatError(what, _LAYOUT)
