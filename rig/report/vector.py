"""Figures as inline SVG that refers to nothing outside the page."""

from __future__ import annotations

import io
import re
from typing import TYPE_CHECKING

from rig.report import palette

if TYPE_CHECKING:
    from matplotlib.figure import Figure


def inline_svg(figure: Figure, prefix: str, description: str) -> str:
    """The figure as an <svg> element for an HTML page.

    `prefix` makes its ids unique within the page; `description` is read out instead of the picture. The XML
    head, name-space addresses and metadata are dropped: in HTML they mean nothing and look like links.
    """
    from matplotlib import rc_context
    from matplotlib.backends.backend_svg import FigureCanvasSVG

    FigureCanvasSVG(figure)
    text = io.StringIO()
    with rc_context({**palette.FIGURE_STYLE, "svg.hashsalt": prefix}):
        figure.savefig(
            text, format="svg", metadata={"Date": None, "Creator": None, "Format": None, "Type": None}
        )
    svg = text.getvalue()
    svg = svg[svg.index("<svg") :]
    svg = re.sub(r"<metadata>.*?</metadata>", "", svg, flags=re.DOTALL)
    svg = re.sub(r"<!--.*?-->", "", svg, flags=re.DOTALL)
    svg = re.sub(r'\sxmlns(:\w+)?="[^"]*"', "", svg)
    svg = re.sub(r'\sid="', f' id="{prefix}-', svg)
    svg = svg.replace('xlink:href="#', f'href="#{prefix}-').replace("url(#", f"url(#{prefix}-")
    # Width and height in points would fix the size; the view box alone lets the page scale it.
    svg = re.sub(r'(<svg\b[^>]*?)\swidth="[^"]*"', r"\1", svg, count=1)
    svg = re.sub(r'(<svg\b[^>]*?)\sheight="[^"]*"', r"\1", svg, count=1)
    label = description.replace("&", "&amp;").replace('"', "&quot;").replace("<", "&lt;")
    return svg.replace("<svg", f'<svg role="img" aria-label="{label}"', 1)
