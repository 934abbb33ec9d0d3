"""The highest voltage Haltere drives anything with, and why."""

from __future__ import annotations

HIGHEST_V = 60.0
ABOVE_60_V = (
    "at most 60 V DC: 60 V DC, ripple-free and dry, limits shock risk only (IEC 61010-1, IEC 60204-1 PELV; 35 V wet; "
    "values from memory); it does not prevent burns, arcs, fire or injury by motion"
)
