"""The theory's curve for a map that grows: no analysis of rows is loaded for it."""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from analysis.averaged import averaged_fold, equilibrium
from rig.description import RigDescription

Fields = dict[str, Any]
THEORY_POINTS = 40


def theory_picture(rig: RigDescription, top_hz: float) -> Fields:
    """The averaged body's rest from its fold to `top_hz`; empty where a constant is missing."""
    nothing: Fields = {"averaged_fold_hz": None, "curve": []}
    if rig.mechanism is None or rig.unknown:
        return nothing
    fold = averaged_fold(rig.mechanism)
    if fold is None:
        return nothing
    curve = []
    if top_hz > fold.flap_hz:
        for rate in fold.flap_hz + (top_hz - fold.flap_hz) * np.linspace(0.0, 1.0, THEORY_POINTS) ** 2:
            rest = equilibrium(rig.mechanism, float(rate))
            if rest is not None:
                curve.append([rest.flap_hz, rest.stiffness_per_s2, math.degrees(rest.angle_rad)])
    return {"averaged_fold_hz": fold.flap_hz, "curve": curve}
