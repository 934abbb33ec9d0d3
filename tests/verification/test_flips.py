"""One flipped bit anywhere: told, or in bytes from which HDF5 reads nothing else than before."""

from __future__ import annotations

import random
from pathlib import Path
from typing import Any

import h5py
import pytest
from sessions_to_damage import tiny

from rig.command.sessions import session_rig
from rig.verification.verify import sound, verify

PLACES = 150


def everything(path: Path) -> dict[str, Any]:
    """All that h5py reads: every value, shape, type and attribute."""
    read: dict[str, Any] = {}

    def look(item: h5py.Group | h5py.Dataset) -> None:
        read[f"{item.name} attributes"] = {name: repr(value) for name, value in item.attrs.items()}
        if isinstance(item, h5py.Group):
            for name in item:
                look(item[name])
        else:
            values = item[()]
            told = values.tolist() if hasattr(values, "tolist") else values
            read[item.name] = (str(item.dtype), item.shape, repr(told))

    with h5py.File(path) as file:
        look(file["/"])
    return read


@pytest.fixture(scope="module")
def whole(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tiny(tmp_path_factory.mktemp("tiny"))


def test_no_flipped_bit_changes_a_value_untold(whole: Path, tmp_path: Path) -> None:
    """Texts and lists of events stand in parts of a file that HDF5 has no check sums for: digests have."""
    assert sound(verify(whole, "another version", session_rig))
    before, data = everything(whole), whole.read_bytes()
    places = random.Random(11).sample(range(len(data)), PLACES)
    broken = tmp_path / "broken.h5"
    told = []
    for place in places:
        flipped = bytearray(data)
        flipped[place] ^= 1 << place % 8
        broken.write_bytes(flipped)
        if sound(verify(broken, "another version", session_rig)):
            assert everything(broken) == before, f"byte {place} of {len(data)}"
        else:
            told.append(place)
    # Most bytes of so small a file are texts; the rest is room HDF5 keeps free.
    assert len(told) > PLACES // 2


@pytest.mark.parametrize("text", ["frame 7", "haltere_rig = 1", "by hand", "haltere of old", "rad"])
def test_a_changed_letter_is_told(whole: Path, tmp_path: Path, text: str) -> None:
    """Of events, rig, calibration, and of attributes: software and a unit."""
    data = whole.read_bytes()
    place = data.find(text.encode())
    assert place > 0
    broken = tmp_path / "broken.h5"
    broken.write_bytes(data[:place] + b"x" + data[place + 1 :])
    found = verify(broken, "another version", session_rig)
    assert not sound(found)
    assert next(check for check in found if check.outcome == "wrong").problems
