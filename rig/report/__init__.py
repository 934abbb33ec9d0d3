"""The report of a session: one self-contained page, and the stability map as a figure."""

from rig.report.curves import MapCurve
from rig.report.document import write_report
from rig.report.provenance import Provenance
from rig.report.stability import map_figure

__all__ = ["MapCurve", "Provenance", "map_figure", "write_report"]
