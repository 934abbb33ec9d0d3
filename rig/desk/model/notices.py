"""Notices of a board in an operator's words."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

NOTICES = {
    "latch": "the board switched off by itself",
    "index_slip": "the index pulse came at another count: an encoder disc slips",
    "damaged_bytes": "bytes damaged on the line",
    "damaged_frame": "a frame damaged on the line",
    "sampler": "",
}
SILENT = ("index", "sync_edge")


def notice_words(event: Mapping[str, Any]) -> str:
    """What a notice tells; "" for one of no use to an operator."""
    kind = str(event.get("notice", ""))
    if kind in SILENT:
        return ""
    words = str(event.get("text") or event.get("cause") or "")
    named = NOTICES.get(kind, kind.replace("_", " "))
    return f"{named}: {words}" if words and named else named or words
