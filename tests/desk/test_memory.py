"""What the window remembers survives, and whatever happened to its file is no error."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from rig.desk.model.memory import MOST_RECENT, Memory


def test_it_is_as_it_was(tmp_path: Path) -> None:
    path = tmp_path / "new folder" / "window.json"
    memory = Memory.load(path)
    assert memory == Memory(path)
    memory.theme, memory.sound, memory.folder, memory.trace_span_s = "dark", False, "/data", 1.5
    memory.rig, memory.protocol, memory.geometry = "boom", "/x/p.toml", "AAAA"
    memory.add_recent("/data/a.h5")
    memory.add_recent("/x/p.toml", "recent_protocols")
    memory.save()
    assert Memory.load(path) == memory
    assert [file.name for file in path.parent.iterdir()] == ["window.json"]  # nothing aside is left


def test_the_latest_comes_first_and_each_once(tmp_path: Path) -> None:
    memory = Memory()
    for number in range(MOST_RECENT + 3):
        memory.add_recent(tmp_path / f"{number}.h5")
    memory.add_recent(tmp_path / "5.h5")
    assert len(memory.recent) == MOST_RECENT and memory.recent[0].endswith("5.h5")
    assert len(set(memory.recent)) == MOST_RECENT


def test_keys_of_another_version_are_kept(tmp_path: Path) -> None:
    path = tmp_path / "window.json"
    path.write_text(json.dumps({"theme": "dark", "of_another_version": [1, 2]}), encoding="utf-8")
    memory = Memory.load(path)
    memory.sound = False
    memory.save()
    stored = json.loads(path.read_text(encoding="utf-8"))
    assert stored["of_another_version"] == [1, 2] and stored["theme"] == "dark" and stored["sound"] is False


@pytest.mark.parametrize("text", ["", "{", "[1]", "null", '"x"', "[" * 100_000, "\x00", '{"theme": NaN}'])
def test_a_damaged_file_is_as_none(tmp_path: Path, text: str) -> None:
    path = tmp_path / "window.json"
    path.write_text(text, encoding="utf-8")
    assert Memory.load(path) == Memory(path)


def test_bytes_that_are_no_text_are_as_none(tmp_path: Path) -> None:
    path = tmp_path / "window.json"
    path.write_bytes(b"\xff\xfe{}")
    assert Memory.load(path) == Memory(path)
    assert Memory.load(tmp_path) == Memory(tmp_path)  # a folder in its place


@pytest.mark.parametrize(
    ("key", "value"),
    [
        ("theme", 3),
        ("sound", 1),
        ("sound", "yes"),
        ("trace_span_s", "2"),
        ("trace_span_s", -1),
        ("trace_span_s", True),
        ("trace_span_s", 1e30),
        ("recent", "x"),
        ("recent", [1]),
        ("geometry", None),
    ],
)
def test_a_value_of_another_kind_is_the_default(tmp_path: Path, key: str, value: object) -> None:
    path = tmp_path / "window.json"
    path.write_text(json.dumps({key: value, "folder": "/data"}), encoding="utf-8")
    memory = Memory.load(path)
    assert getattr(memory, key) == getattr(Memory(), key) and memory.folder == "/data"


def test_too_many_recent_ones_are_cut(tmp_path: Path) -> None:
    path = tmp_path / "window.json"
    path.write_text(json.dumps({"recent": ["a", "a", *map(str, range(99))]}), encoding="utf-8")
    assert Memory.load(path).recent == ["a", *map(str, range(MOST_RECENT - 1))]


def test_where_nothing_can_be_written_nothing_is_said(tmp_path: Path) -> None:
    (tmp_path / "file").touch()
    Memory(tmp_path / "file" / "window.json").save()
    Memory(None).save()
    memory = Memory(tmp_path / "window.json", folder="\ud800")
    memory.save()  # JSON escapes it
    assert Memory.load(tmp_path / "window.json").folder == "\ud800"
