"""The theory line of the stability map: the averaged body at rest, from the rig's constants."""

from __future__ import annotations

import numpy as np

from rig.description import RigDescription
from rig.report.curves import MapCurve
from rig.results import SessionResult

POINTS = 60
RAD_TO_DEG = 180.0 / np.pi
LABEL = "theory: averaged potential"
#: Constants the averaged body does not depend on, by the beginning of their names.
NOT_NEEDED = ("motor_", "winding_", "housing_", "copper_", "gear_", "flywheel_", "stop_")
DAMPING_ONLY = ("hinge_damping_n_m_s",)


def averaged_curve(rig: RigDescription, result: SessionResult) -> MapCurve | None:
    """Stiffness, decay rate and mean angle of the averaged body from its fold to the highest level.

    None where a constant it needs is not known, where the mechanism has no such boundary, or where the
    session stayed below it. Without the hinge damping the decay rate is left out.
    """
    from analysis.averaged import averaged_fold, equilibrium

    needed = [name for name in rig.unknown if not name.startswith(NOT_NEEDED)]
    if rig.mechanism is None or any(name not in DAMPING_ONLY for name in needed):
        return None
    fold = averaged_fold(rig.mechanism)
    top_hz = max((level.flap_hz.value for level in result.levels if level.flap_hz.value), default=0.0)
    if fold is None or top_hz <= fold.flap_hz:
        return None
    # Near the fold all goes with the square root of the distance: points crowd there.
    flap = fold.flap_hz + (1.02 * top_hz - fold.flap_hz) * np.linspace(0.0, 1.0, POINTS) ** 2
    rests = [rest for rest in (equilibrium(rig.mechanism, float(rate)) for rate in flap) if rest is not None]
    if len(rests) < 2:
        return None
    return MapCurve(
        LABEL,
        np.array([rest.flap_hz for rest in rests]),
        np.array([rest.stiffness_per_s2 for rest in rests]),
        None if needed else np.array([rest.decay_per_s for rest in rests]),
        np.array([rest.angle_rad for rest in rests]) * RAD_TO_DEG,
    )
