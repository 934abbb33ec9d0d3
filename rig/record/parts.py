"""Parts of a session file read as what they must be; if they are not, a sentence says which, where and what instead."""

from __future__ import annotations

import json
import math
from pathlib import Path
from typing import Any, TypeAlias

import h5py
import numpy as np
from numpy.typing import NDArray

from rig.record.errors import Damaged

Item: TypeAlias = h5py.Group | h5py.Dataset


def damaged(path: Path, place: str, expected: str, row: int | None = None) -> Damaged:
    """The error for one part; `row` counts from 0, as HDF5 does."""
    where = place if row is None else f"{place}, row {row}"
    return Damaged(f"{path} is damaged: {where}: expected {expected}")


class Parts:
    """The parts of one file; every method raises Damaged."""

    def __init__(self, file: h5py.File, path: Path) -> None:
        self._file = file
        self.path = path

    def item(self, place: str) -> Item:
        if place not in self._file:
            raise Damaged(f"{self.path} is damaged: {place} is missing")
        return self._file[place]

    def group(self, place: str) -> h5py.Group:
        item = self.item(place)
        if not isinstance(item, h5py.Group):
            raise damaged(self.path, place, "a group")
        return item

    def values(self, place: str) -> NDArray[Any]:
        """A dataset of one row, all of it."""
        item = self.item(place)
        if not isinstance(item, h5py.Dataset) or item.ndim != 1:
            raise damaged(self.path, place, "values in one row")
        try:
            return item[:]
        except (OSError, RuntimeError):
            raise damaged(self.path, place, "values that can be read") from None

    def whole(self, place: str) -> list[int]:
        values = self.values(place)
        if values.dtype.kind not in "iu":
            raise damaged(self.path, place, "whole numbers")
        return [int(value) for value in values]

    def texts(self, place: str) -> list[str]:
        found = []
        for row, value in enumerate(self.values(place)):
            if not isinstance(value, bytes | str):
                raise damaged(self.path, place, "texts")
            found.append(self._decoded(value, place, row))
        return found

    def text(self, place: str) -> str:
        item = self.item(place)
        value = item[()] if isinstance(item, h5py.Dataset) and item.shape == () else None
        if not isinstance(value, bytes | str):
            raise damaged(self.path, place, "one text")
        return self._decoded(value, place, None)

    def json(self, place: str) -> Any:
        return self.json_of(self.text(place), place)

    def json_object(self, place: str) -> dict[str, Any]:
        return self.object_of(self.text(place), place)

    def object_of(self, text: str, place: str, row: int | None = None) -> dict[str, Any]:
        found = self.json_of(text, place, row)
        if not isinstance(found, dict):
            raise damaged(self.path, place, "a JSON object", row)
        return found

    def json_of(self, text: str, place: str, row: int | None = None) -> Any:
        try:
            return json.loads(text)
        except (ValueError, RecursionError):
            raise damaged(self.path, place, "JSON", row) from None

    def same_length(self, columns: dict[str, Any]) -> None:
        """Columns that belong together, {place: values}."""
        (first, values), *others = columns.items()
        for place, more in others:
            if len(more) != len(values):
                raise damaged(self.path, place, f"{len(values)} rows as in {first}, found {len(more)}")

    def _decoded(self, value: bytes | str, place: str, row: int | None) -> str:
        try:
            return value.decode() if isinstance(value, bytes) else value
        except UnicodeDecodeError:
            raise damaged(self.path, place, "text in UTF-8", row) from None


def attribute(item: Item, name: str, path: Path) -> Any:
    """The value of an attribute."""
    if name not in item.attrs:
        raise damaged(path, item.name, f"an attribute {name}")
    value = item.attrs[name]
    return value.item() if isinstance(value, np.generic) else value


def whole_attribute(item: Item, name: str, path: Path) -> int:
    value = attribute(item, name, path)
    if isinstance(value, bool) or not isinstance(value, int):
        raise damaged(path, item.name, f"a whole number as {name}, found {_short(value)}")
    return value


def number_attribute(item: Item, name: str, path: Path) -> float:
    """A finite number."""
    value = attribute(item, name, path)
    if isinstance(value, bool) or not isinstance(value, int | float) or not math.isfinite(value):
        raise damaged(path, item.name, f"a number as {name}, found {_short(value)}")
    return float(value)


def text_attribute(item: Item, name: str, path: Path) -> str:
    value = attribute(item, name, path)
    if not isinstance(value, str):
        raise damaged(path, item.name, f"a text as {name}, found {_short(value)}")
    return value


def _short(value: Any) -> str:
    told = " ".join(repr(value).split())
    return told if len(told) <= 40 else told[:37] + "..."
