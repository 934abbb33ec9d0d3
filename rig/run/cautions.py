"""The cautions shown before a run and in the report, and who has acknowledged them."""

from __future__ import annotations

from dataclasses import dataclass

CAUTIONS = (
    "Extra-low-voltage DC only. 60 V DC, ripple-free and dry, limits shock risk only (IEC 61010-1, "
    "IEC 60204-1 PELV; 35 V wet; values from memory); it does not prevent burns, arcs, fire or "
    "injury by motion.",
    "The software halt is not a safety-rated stop. Have a hardware emergency stop within reach.",
    "Off does not mean stopped: the flywheel coasts for seconds. Wait for standstill; disconnect and "
    "discharge before touching.",
    "Keep hands, hair and sleeves away from wings, crank and carriage. Wear eye protection.",
    "Tap by hand only through the guard opening, with a non-conducting rod of 300 mm or more.",
    "Use a current-limited supply and a fuse. Braking a flywheel pumps the supply: fit a clamp or a brake "
    "resistor. Never leave lithium batteries unattended.",
    "Local codes and licensed practice come first.",
)

#: How long an acknowledgement holds: one shift.
VALID_S = 8 * 3600.0


@dataclass(frozen=True)
class Acknowledgement:
    """Somebody has read the cautions, for one rig, at one time (s since the epoch, UTC)."""

    name: str
    rig_sha256: str
    utc_s: float

    def holds(self, rig_sha256: str, utc_s: float) -> bool:
        """Whether it covers a run on this rig at this time; a clock set back does not prolong it."""
        return self.rig_sha256 == rig_sha256 and 0.0 <= utc_s - self.utc_s <= VALID_S
