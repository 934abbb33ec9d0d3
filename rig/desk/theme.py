"""Colours of the window, light and dark, as plain data.

Data colours are of the eight of Okabe and Ito, told apart with every common kind of colour blindness (M. Okabe,
K. Ito, Color Universal Design, 2008); on dark ground the darkest two are lightened. Text reaches a contrast of 4.5 : 1
and what must be seen 3 : 1 against its ground (WCAG 2.2, 1.4.3 and 1.4.11); the tests compute it. No meaning rests on
colour alone: direction is also a shape, regime a filling and a word.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Theme:
    """Colours as #rrggbb."""

    name: str
    ground: str  # behind everything
    panel: str  # a part of the window
    raised: str  # a button
    rule: str  # lines between parts, grid
    ink: str  # text
    faint: str  # text of less weight
    accent: str  # what is chosen, what is next
    accent_ink: str  # text on it
    halt: str  # the halt control: not the red and yellow of an emergency stop, which it is not
    halt_ink: str
    alert: str  # tripped
    alert_ink: str
    falling: str
    rising: str
    fit: str
    theory: str
    trace: str  # a live signal
    mean: str  # its cycle mean
    band: str  # a boundary's interval, an interval used (drawn translucent)


LIGHT = Theme(
    name="light",
    ground="#EEF1F2",
    panel="#FFFFFF",
    raised="#E2E7E9",
    rule="#C9D1D5",
    ink="#1B262C",
    faint="#55626A",
    accent="#0072B2",
    accent_ink="#FFFFFF",
    halt="#3B1D5E",
    halt_ink="#FFFFFF",
    alert="#A8380A",
    alert_ink="#FFFFFF",
    falling="#0072B2",
    rising="#C24E00",
    fit="#007A59",
    theory="#55626A",
    trace="#2E86C1",
    mean="#1B262C",
    band="#E69F00",
)
DARK = Theme(
    name="dark",
    ground="#12181C",
    panel="#1B2328",
    raised="#2B363D",
    rule="#3C4951",
    ink="#E8EEF1",
    faint="#A3B1B9",
    accent="#56B4E9",
    accent_ink="#0B1317",
    halt="#C9A6F2",
    halt_ink="#1D0B33",
    alert="#FF9C66",
    alert_ink="#2B0F00",
    falling="#56B4E9",
    rising="#F2914A",
    fit="#2FC79A",
    theory="#A3B1B9",
    trace="#56B4E9",
    mean="#F3F7F9",
    band="#E69F00",
)
THEMES = {theme.name: theme for theme in (LIGHT, DARK)}


def contrast(one: str, other: str) -> float:
    """Contrast ratio of two colours, 1 to 21 (WCAG 2.2, relative luminance)."""
    lighter, darker = sorted((_luminance(one), _luminance(other)), reverse=True)
    return (lighter + 0.05) / (darker + 0.05)


def _luminance(colour: str) -> float:
    parts = [int(colour[at : at + 2], 16) / 255.0 for at in (1, 3, 5)]
    red, green, blue = (
        part / 12.92 if part <= 0.04045 else ((part + 0.055) / 1.055) ** 2.4 for part in parts
    )
    return 0.2126 * red + 0.7152 * green + 0.0722 * blue
