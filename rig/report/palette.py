"""Colours and line styles of all figures.

The colours are the eight of Okabe and Ito, told apart with every common kind of colour blindness
(M. Okabe, K. Ito, Color Universal Design, 2008). No meaning rests on colour alone: direction is also
the marker's shape, regime its filling.
"""

from __future__ import annotations

from typing import Any

BLACK = "#000000"
ORANGE = "#E69F00"
SKY_BLUE = "#56B4E9"
GREEN = "#009E73"
YELLOW = "#F0E442"
BLUE = "#0072B2"
VERMILLION = "#D55E00"
PURPLE = "#CC79A7"

INK = "#22303A"
FAINT = "#8A959C"
RULE = "#D5DADD"
PAPER = "#FFFFFF"
WASH = "#F3F5F4"

DIRECTION_COLOUR = {"falling": BLUE, "rising": VERMILLION}
DIRECTION_MARKER = {"falling": "v", "rising": "^"}
THEORY_COLOUR = INK
FIT_COLOUR = GREEN

#: Settings of the plotting library used while a figure is made and written.
FIGURE_STYLE: dict[Any, Any] = {
    "figure.facecolor": PAPER,
    "axes.facecolor": PAPER,
    "axes.edgecolor": FAINT,
    "axes.labelcolor": INK,
    "axes.linewidth": 0.7,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.titlesize": 8.5,
    "axes.titlelocation": "left",
    "axes.titlecolor": INK,
    "axes.labelsize": 8.0,
    "xtick.color": FAINT,
    "ytick.color": FAINT,
    "xtick.labelcolor": INK,
    "ytick.labelcolor": INK,
    "xtick.labelsize": 7.5,
    "ytick.labelsize": 7.5,
    "xtick.major.width": 0.7,
    "ytick.major.width": 0.7,
    "text.color": INK,
    "font.size": 8.0,
    "legend.fontsize": 7.5,
    "legend.frameon": False,
    "lines.linewidth": 1.1,
    "hatch.linewidth": 0.5,
    "svg.fonttype": "path",
    "path.simplify": True,
    "path.simplify_threshold": 0.3,
}
