"""The taps an operator took back, and why: the tap is left out at once, its reason may come later or never."""

from __future__ import annotations

from rig.run import commands as cm
from rig.run.inputs import OperatorInput


class LeftOut:
    """Numbers of the taps left out so far, in order."""

    def __init__(self) -> None:
        self._taps: list[int] = []

    def exclude(self, tap: int, reason: str) -> list[cm.Command]:
        """Leave a tap out, once."""
        if tap in self._taps:
            return []
        self._taps.append(tap)
        return [cm.Record("tap_excluded", {"tap": tap, "reason": reason})]

    def tell(self, one: OperatorInput) -> cm.Command:
        """Why a tap was left out, by the one it names or the last one; a refusal if there is none such."""
        tap = one.tap if one.tap is not None else self._taps[-1] if self._taps else None
        if not one.reason:
            return cm.Record("refused", {"reason": "a reason without words was given for a tap left out"})
        if tap is None:
            words = "no tap has been left out that a reason could be given for"
            return cm.Record("refused", {"reason": words})
        if tap not in self._taps:
            words = f"tap {tap} has not been left out, so it takes no reason"
            return cm.Record("refused", {"reason": words})
        return cm.Record("tap_reason", {"tap": tap, "reason": one.reason})
