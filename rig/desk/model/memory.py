"""What the window remembers from one start to the next: never more than a convenience, so never an error."""

from __future__ import annotations

import json
from contextlib import suppress
from dataclasses import dataclass, field, fields
from pathlib import Path
from typing import Any

MOST_RECENT = 10


@dataclass
class Memory:
    """Kept as JSON at `path` (None: nowhere). Damaged or absent: the defaults. Unknown keys are kept as they are."""

    path: Path | None = None
    theme: str = "light"
    sound: bool = True
    geometry: str = ""  # of the window, as text
    folder: str = ""  # of the last session
    trace_span_s: float = 2.0
    rig: str = ""  # a path, or the name of a shipped file
    protocol: str = ""
    operator: str = ""  # who acknowledged the cautions last; typed in advance, never acknowledged in advance
    recent: list[str] = field(default_factory=list)  # sessions, latest first
    recent_rigs: list[str] = field(default_factory=list)
    recent_protocols: list[str] = field(default_factory=list)
    unknown: dict[str, Any] = field(default_factory=dict)

    @classmethod
    def load(cls, path: Path) -> Memory:
        """Read what is at `path`; whatever of it makes no sense is as if it had never been there."""
        memory = cls(path)
        try:
            stored = json.loads(path.read_text(encoding="utf-8"))
        except (OSError, ValueError, RecursionError):
            return memory
        if not isinstance(stored, dict):
            return memory
        for key, value in stored.items():
            if key not in KEPT:
                memory.unknown[key] = value
            elif _sensible(value, getattr(memory, key)):
                setattr(memory, key, value)
        for name in ("recent", "recent_rigs", "recent_protocols"):
            setattr(memory, name, list(dict.fromkeys(getattr(memory, name)))[:MOST_RECENT])
        return memory

    def save(self) -> None:
        """Write it down, aside first; if that cannot be done it is forgotten."""
        if self.path is None:
            return
        stored = {**self.unknown, **{key: getattr(self, key) for key in KEPT}}
        aside = self.path.with_suffix(".part")
        with suppress(OSError, UnicodeEncodeError):
            self.path.parent.mkdir(parents=True, exist_ok=True)
            aside.write_text(json.dumps(stored, indent=1), encoding="utf-8")
            aside.replace(self.path)

    def add_recent(self, path: str | Path, which: str = "recent") -> None:
        """Put a file first among the recent sessions (or "recent_rigs", "recent_protocols")."""
        name = str(path)
        before: list[str] = getattr(self, which)
        setattr(self, which, [name, *(one for one in before if one != name)][:MOST_RECENT])


KEPT = tuple(one.name for one in fields(Memory) if one.name not in ("path", "unknown"))


def _sensible(value: object, default: object) -> bool:
    """Whether a stored value is of the kind of its default."""
    if isinstance(default, bool) or isinstance(value, bool):
        return isinstance(value, bool) and isinstance(default, bool)
    if isinstance(default, float):
        return isinstance(value, int | float) and 0.0 < value < 1e6
    if isinstance(default, list):
        return isinstance(value, list) and all(isinstance(one, str) for one in value)
    return isinstance(value, type(default))
