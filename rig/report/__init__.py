"""The report of a session: one self-contained page, and the stability map as a figure."""

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
