"""The report of a session: one self-contained page, and the stability map as a figure.

Names are loaded when asked for: whoever only rounds a number as the report does need not load its plots.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from rig.report.curves import MapCurve, fitted_curve, form_points
    from rig.report.document import write_report
    from rig.report.provenance import Provenance
    from rig.report.stability import map_figure
    from rig.report.theory import averaged_curve

__all__ = [
    "MapCurve",
    "Provenance",
    "averaged_curve",
    "fitted_curve",
    "form_points",
    "map_figure",
    "write_report",
]
PLACES = {
    "MapCurve": "curves",
    "Provenance": "provenance",
    "averaged_curve": "theory",
    "fitted_curve": "curves",
    "form_points": "curves",
    "map_figure": "stability",
    "write_report": "document",
}


def __getattr__(name: str) -> object:
    if name not in PLACES:
        raise AttributeError(name)
    return getattr(import_module(f"rig.report.{PLACES[name]}"), name)
