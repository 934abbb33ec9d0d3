"""Text and marks can be read on their ground, light and dark (WCAG 2.2: 1.4.3 text 4.5 : 1, 1.4.11 marks 3 : 1)."""

from __future__ import annotations

import pytest

from rig.desk.theme import THEMES, contrast

TEXT = [
    ("ink", "ground"),
    ("ink", "panel"),
    ("ink", "raised"),
    ("faint", "ground"),
    ("faint", "panel"),
    ("accent_ink", "accent"),
    ("halt_ink", "halt"),
    ("alert_ink", "alert"),
    ("alert", "panel"),
]
MARKS = [(name, "panel") for name in ("falling", "rising", "fit", "theory", "trace", "mean", "accent")]


def test_contrast_against_worked_values() -> None:
    """Black on white is 21 : 1 by definition; #777777 on white is 4.48 : 1 (value from memory)."""
    assert contrast("#000000", "#FFFFFF") == pytest.approx(21.0)
    assert contrast("#777777", "#FFFFFF") == pytest.approx(4.48, abs=0.01)


@pytest.mark.parametrize("name", THEMES)
def test_everything_can_be_read(name: str) -> None:
    theme = THEMES[name]
    for least, pairs in ((4.5, TEXT), (3.0, MARKS)):
        for front, back in pairs:
            ratio = contrast(getattr(theme, front), getattr(theme, back))
            assert ratio >= least, f"{front} on {back}: {ratio:.2f}"
