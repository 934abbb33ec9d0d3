"""The date and time of day, for the records; logic never asks for it."""

from __future__ import annotations

from datetime import UTC, datetime


def utc_text() -> str:
    """Now, UTC, as in ISO 8601."""
    return datetime.now(UTC).isoformat(timespec="seconds")


def utc_s() -> float:
    """Now, seconds since the epoch, UTC."""
    return datetime.now(UTC).timestamp()
