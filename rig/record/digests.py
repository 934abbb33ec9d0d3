"""Digests of what stands in a session file: any change to a value shows, whatever made it.

`/digests` is JSON: {"datasets": {path: SHA-256}, "attributes": {path: SHA-256}}, in hexadecimal.

    numbers      their bytes, little-endian, row by row
    one text     its UTF-8
    texts        the UTF-8 of each, followed by a zero byte
    attributes   the JSON text of {name: value}, sorted by name, ASCII only, no spaces, numbers as Python writes them

All datasets but `/digests` itself are digested, and the attributes of everything that has any.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterable, Iterator, Mapping
from pathlib import Path
from typing import Any

import h5py
import numpy as np
from numpy.typing import NDArray

from rig.record.errors import Damaged
from rig.record.inspection import inspect

PLACE = "/digests"
TEXT = h5py.string_dtype("utf-8")
CHUNK_ROWS = 16384
UNREADABLE = "unreadable"
#: Values read at a time: a column of an hour does not have to fit into memory.
READ_ROWS = 1 << 18


class DigestingFile:
    """Writes datasets and attributes to an open file and notes the digest of each from what was given."""

    def __init__(self, file: h5py.File) -> None:
        self._file = file
        self.datasets: dict[str, str] = {}
        self.attributes: dict[str, str] = {}

    def attribute_set(self, path: str, values: Mapping[str, Any]) -> None:
        """All attributes of one object, str, int or float."""
        for name, value in values.items():
            self._file[path].attrs[name] = value
        self.attributes[path] = of_attributes(values)

    def group(self, path: str, values: Mapping[str, Any]) -> None:
        """A group with attributes."""
        self._file.create_group(path)
        self.attribute_set(path, values)

    def text(self, path: str, text: str) -> None:
        self._file.create_dataset(path, data=text, dtype=TEXT)
        self.datasets[path] = hashlib.sha256(text.encode()).hexdigest()

    def texts(self, path: str, texts: list[str]) -> None:
        self._file.create_dataset(path, shape=(len(texts),), data=np.array(texts, dtype=object), dtype=TEXT)
        self.datasets[path] = _of_texts(text.encode() for text in texts)

    def numbers(self, path: str, values: NDArray[Any]) -> None:
        self._file[path] = values
        self.datasets[path] = _of_numbers([values])

    def column(self, path: str, shape: tuple[int, ...], kind: str, parts: Iterable[NDArray[Any]]) -> None:
        """A compressed array, given in parts along its first axis."""
        data = self._file.create_dataset(
            path,
            shape=shape,
            dtype=kind,
            chunks=(max(1, min(CHUNK_ROWS, shape[0])), *shape[1:]),
            maxshape=(None, *shape[1:]),
            shuffle=True,
            compression="gzip",
            compression_opts=1,
        )

        def written() -> Iterator[NDArray[Any]]:
            start = 0
            for part in parts:
                data[start : start + len(part)] = part
                start += len(part)
                yield part

        self.datasets[path] = _of_numbers(written())

    def finish(self) -> None:
        """Write the digests themselves."""
        text = json.dumps({"datasets": self.datasets, "attributes": self.attributes}, indent=0)
        self._file.create_dataset(PLACE, data=text, dtype=TEXT)


def of_attributes(values: Mapping[str, Any]) -> str:
    """The digest of the attributes of one object."""
    plain = {name: value.item() if isinstance(value, np.generic) else value for name, value in values.items()}
    return hashlib.sha256(json.dumps(plain, sort_keys=True, separators=(",", ":")).encode()).hexdigest()


def of_dataset(data: h5py.Dataset) -> str:
    """The digest of a dataset, read piece by piece.

    ValueError for a kind of value no session holds; OSError or RuntimeError where it cannot be read.
    """
    if h5py.check_string_dtype(data.dtype) is not None:
        found = data[()]
        if data.shape == ():
            return hashlib.sha256(_bytes(found)).hexdigest()
        return _of_texts(_bytes(text) for text in found.ravel())
    if data.dtype.kind not in "iuf" or not data.shape:
        raise ValueError(f"{data.name} holds {data.dtype} {data.shape}")
    return _of_numbers(data[start : start + READ_ROWS] for start in range(0, data.shape[0], READ_ROWS))


def of_file(file: h5py.File) -> dict[str, dict[str, str]]:
    """All digests worked out from what stands in the file, in the form of `/digests`.

    What cannot be read has the digest UNREADABLE.
    """
    datasets: dict[str, str] = {}
    attributes: dict[str, str] = {}

    def look(item: h5py.Group | h5py.Dataset) -> None:
        try:
            if values := dict(item.attrs):
                attributes[item.name] = of_attributes(values)
        except (OSError, RuntimeError, ValueError, TypeError, KeyError):
            attributes[item.name] = UNREADABLE
        if isinstance(item, h5py.Group):
            for name in item:
                look(item[name])
        elif item.name != PLACE:
            try:
                datasets[item.name] = of_dataset(item)
            except (OSError, RuntimeError, ValueError, TypeError):
                datasets[item.name] = UNREADABLE

    look(file["/"])
    return {"datasets": datasets, "attributes": attributes}


def stored(file: h5py.File) -> dict[str, dict[str, str]] | None:
    """What `/digests` says; None if the file has none. ValueError if it is not what it should be."""
    if PLACE not in file:
        return None
    try:
        found = json.loads(_bytes(file[PLACE][()]))
        told = {kind: dict(found[kind]) for kind in ("datasets", "attributes")}
    except (OSError, RuntimeError, ValueError, TypeError, KeyError, AttributeError, RecursionError):
        raise ValueError(f"{PLACE} cannot be read") from None
    if set(found) != set(told) or not all(isinstance(d, str) for one in told.values() for d in one.values()):
        raise ValueError(f"{PLACE} is not two lists of digests")
    return told


def problems(path: Path) -> list[str] | None:
    """Everything in a file that is not what its digests say, in words; None if the file holds none.

    Damaged if it cannot even be looked through.
    """
    found = _differences(path)
    return None if found is None else [words for _, words in found]


def changed_places(path: Path) -> list[str] | None:
    """The parts of a file that are not what their digests say, each once; None if the file holds none.

    Damaged if it cannot even be looked through.
    """
    found = _differences(path)
    return None if found is None else list(dict.fromkeys(place for place, _ in found))


def _differences(path: Path) -> list[tuple[str, str]] | None:
    try:
        with h5py.File(path, "r") as file:
            inspect(file, path)
            told = stored(file)
            if told is None:
                return None
            found = of_file(file)
    except ValueError as error:
        return [(PLACE, str(error))]
    except (OSError, RuntimeError, KeyError, AttributeError, TypeError, RecursionError):
        raise Damaged(f"{path} cannot be looked through") from None
    wrong: list[tuple[str, str]] = []
    for kind, words in (("datasets", ""), ("attributes", "the attributes of ")):
        for name in sorted({*told[kind], *found[kind]}):
            if name not in found[kind]:
                wrong.append((name, f"{words}{name} are missing" if words else f"{name} is missing"))
            elif name not in told[kind]:
                wrong.append((name, f"{words}{name} came later"))
            elif found[kind][name] == UNREADABLE:
                wrong.append((name, f"{words}{name} cannot be read"))
            elif found[kind][name] != told[kind][name]:
                wrong.append((name, f"{words}{name} have changed" if words else f"{name} has changed"))
    return wrong


def carry_over(old: h5py.File, new: h5py.File, path: str) -> None:
    """Write the digests of one file to a copy in which the dataset at `path` is another; no other is touched.

    A file without digests stays without, so that it still shows that they are missing. ValueError if they cannot
    be read.
    """
    told = stored(old)
    if told is None:
        return
    data = new[path]
    told["datasets"][path] = of_dataset(data)
    told["attributes"].pop(path, None)
    if values := dict(data.attrs):
        told["attributes"][path] = of_attributes(values)
    new.create_dataset(PLACE, data=json.dumps(told, indent=0), dtype=TEXT)


def _of_numbers(parts: Iterable[NDArray[Any]]) -> str:
    digest = hashlib.sha256()
    for part in parts:
        digest.update(np.ascontiguousarray(part, dtype=part.dtype.newbyteorder("<")).tobytes())
    return digest.hexdigest()


def _of_texts(texts: Iterable[bytes]) -> str:
    digest = hashlib.sha256()
    for text in texts:
        digest.update(text + b"\0")
    return digest.hexdigest()


def _bytes(value: Any) -> bytes:
    return value if isinstance(value, bytes) else str(value).encode()
