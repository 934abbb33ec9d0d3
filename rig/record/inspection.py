"""What a session file must not be, found before anything is read from it."""

from __future__ import annotations

import contextlib
from pathlib import Path

import h5py
import numpy as np

from rig.record.errors import Damaged
from rig.record.heaps import damaged_heap

#: A compressed stream is never larger than this many times its file.
MOST_EXPANSION = 2000


def inspect(file: h5py.File, path: Path) -> None:
    """Damaged for what could lead out of the file, fill the memory or never end, and for columns of the wrong kind.

    To be called before any text or attribute of the file is read.
    """
    size = path.stat().st_size
    columns: list[tuple[int, int]] = []
    seen: set[int] = set()

    def look(group: h5py.Group) -> None:
        for name in group:
            link = group.get(name, getlink=True)
            if not isinstance(link, h5py.HardLink):
                raise Damaged(f"{path}: {group.name.rstrip('/')}/{name} links to another place")
            item = group[name]
            # A group reached twice could hold itself, or groups without end.
            address = h5py.h5o.get_info(item.id).addr
            if address in seen:
                raise Damaged(f"{path}: {group.name.rstrip('/')}/{name} stands in two places")
            seen.add(address)
            if isinstance(item, h5py.Group):
                look(item)
                continue
            if item.is_virtual or item.external:
                raise Damaged(f"{path}: {item.name} keeps its data in another file")
            if item.size and item.size * item.dtype.itemsize > MOST_EXPANSION * size + 2**20:
                raise Damaged(f"{path}: {item.name} claims {item.size} values, more than the file can hold")
            columns.extend(_chunks(item))

    seen.add(h5py.h5o.get_info(file.id).addr)
    look(file)
    place = damaged_heap(path, columns)
    if place is not None:
        raise Damaged(f"{path}: the texts kept from byte {place} on are damaged")
    streams = file.get("streams")
    if not isinstance(streams, h5py.Group) or not isinstance(streams.get("board"), h5py.Group):
        raise Damaged(f"{path} has no stream of the board")
    for stream in file["streams"].values():
        if not isinstance(stream, h5py.Group):
            raise Damaged(f"{path} is damaged: {stream.name}: expected a group")
        for name, data in stream.items():
            if not isinstance(data, h5py.Dataset):
                raise Damaged(f"{path} is damaged: {data.name}: expected a column")
            wanted = {"tick": "u8", "time_s": "f8", "status": "u2"}.get(name, "i4")
            if data.ndim != 1 or data.dtype != np.dtype(wanted):
                raise Damaged(
                    f"{path}: {data.name} is {data.dtype} {data.shape}, expected {wanted} in one row"
                )
    for sampler in file.get("samplers", {}).values():
        lengths = set()
        for name, data in sampler.items():
            wanted = "u8" if name in ("arrival_tick", "device_tick") else "f8"
            if data.ndim != 1 or data.dtype != np.dtype(wanted):
                raise Damaged(
                    f"{path}: {data.name} is {data.dtype} {data.shape}, expected {wanted} in one row"
                )
            lengths.add(data.shape)
        if len(lengths) != 1 or "time_s" not in sampler:
            raise Damaged(f"{path}: {sampler.name} has no times, or columns of different length")


def _chunks(data: h5py.Dataset) -> list[tuple[int, int]]:
    """Where the values of a compressed dataset stand in the file; nothing for others."""
    found: list[tuple[int, int]] = []
    if data.chunks is not None:
        with contextlib.suppress(
            OSError, RuntimeError, AttributeError
        ):  # an old h5py, or damage: all is looked at
            data.id.chunk_iter(
                lambda chunk: found.append((chunk.byte_offset, chunk.byte_offset + chunk.size))
            )
    return found
