"""Predicted boundaries from the rig's own constants, or the reason why there are none."""

from __future__ import annotations

from analysis.averaged import averaged_fold
from analysis.mathieu import mathieu_boundary_hz
from rig.description import RigDescription
from rig.results import Theory

#: Without one of these nothing can be predicted.
NEEDED = ("body_mass_kg", "cm_height_m", "body_inertia_kg_m2")


def theory(rig: RigDescription) -> Theory:
    """Averaged fold, Floquet boundary (motor in the loop) and Mathieu limit; None where a constant is missing."""
    if rig.mechanism is None:
        return Theory(reason="the rig file has no constants of the mechanism")
    unknown = [name for name in rig.unknown if name in NEEDED]
    if unknown:
        return Theory(reason=f"not known: {', '.join(unknown)}")
    averaged = averaged_fold(rig.mechanism)
    if averaged is None:
        return Theory(reason="the carriage is not shaken: nothing can hold the body by vibration")
    from analysis.floquet import boundary_by_floquet

    floquet = None if rig.unknown else boundary_by_floquet(rig.mechanism)
    return Theory(
        averaged_fold_hz=averaged.flap_hz,
        floquet_hz=None if floquet is None else floquet.flap_hz,
        floquet_v=None if floquet is None else floquet.drive_v,
        mathieu_hz=mathieu_boundary_hz(rig.mechanism),
        reason="" if not rig.unknown else f"no Floquet prediction, not known: {', '.join(rig.unknown)}",
    )
