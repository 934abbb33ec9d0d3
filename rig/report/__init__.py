"""The report of a session: one self-contained page, and the stability map as a figure."""

from rig.report.curves import MapCurve, straight_fit
from rig.report.document import write_report
from rig.report.provenance import Provenance
from rig.report.stability import map_figure
from rig.report.theory import averaged_curve

__all__ = ["MapCurve", "Provenance", "averaged_curve", "map_figure", "straight_fit", "write_report"]
