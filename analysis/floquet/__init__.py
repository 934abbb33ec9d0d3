"""Floquet theory of the complete mechanism: motor in the loop, or the crank rate prescribed."""

from analysis.floquet.boundary import (
    FloquetBoundary,
    FloquetMode,
    boundary_by_floquet,
    boundary_prescribed,
    mode_at_flap,
    mode_at_voltage,
)

__all__ = [
    "FloquetBoundary",
    "FloquetMode",
    "boundary_by_floquet",
    "boundary_prescribed",
    "mode_at_flap",
    "mode_at_voltage",
]
