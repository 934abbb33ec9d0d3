"""Cautions printed on every report, for whoever repeats the run from it."""

from __future__ import annotations

CAUTIONS = (
    "60 V DC, ripple-free and dry, limits shock risk only (IEC 61010-1, IEC 60204-1 PELV; 35 V wet; values "
    "from memory); it does not prevent burns, arcs, fire or injury by motion.",
    "Off does not mean stopped: a flywheel coasts for seconds, through the carriage resonance. Wait for "
    "standstill.",
    "The software halt is not safety-rated. Keep a hardware emergency stop in reach.",
    "Tap by hand only through a guard opening, with a non-conducting rod of 300 mm or more. Wear eye "
    "protection.",
    "Use a current-limited supply and a fuse; disconnect and discharge before touching; never leave lithium "
    "batteries unattended.",
    "Local codes and licensed practice come first.",
)
