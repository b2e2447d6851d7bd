"""matplotlib figures as SVG text: vectors, text as text, and the same bytes each time."""

from __future__ import annotations

import io
from collections.abc import Callable

import matplotlib
from matplotlib.figure import Figure

__all__ = ["ACCENT", "INK", "MUTED", "draw_svg"]

ACCENT = "#17545c"
"""The report's one accent colour; the template has the same."""

INK = "#1b1f22"
MUTED = "#5d666b"

_METRICS_FONT = "DejaVu Sans"
"""matplotlib lays text out with a font that it ships …"""

_TYPESET_FONT = "Libertinus Serif"
"""… and the typesetter sets it in the report's own, which is narrower, so nothing overlaps."""

_RC = {
    "svg.fonttype": "none",  # text stays text: selectable, and embedded with the page's font
    "svg.hashsalt": "liverfe-report",  # element ids from content alone
    "font.family": _METRICS_FONT,
    "font.size": 8.0,
    "text.color": INK,
    "axes.edgecolor": MUTED,
    "axes.labelcolor": INK,
    "axes.linewidth": 0.6,
    "xtick.color": MUTED,
    "ytick.color": MUTED,
    "xtick.labelcolor": INK,
    "ytick.labelcolor": INK,
    "xtick.labelsize": 8.0,
    "ytick.labelsize": 8.0,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "xtick.major.size": 3.0,
    "ytick.major.size": 3.0,
    "figure.facecolor": "none",
    "axes.facecolor": "none",
    "savefig.facecolor": "none",
}


def draw_svg(size_in: tuple[float, float], draw: Callable[[Figure], None]) -> str:
    """Draw one figure and return it as SVG.

    Parameters
    ----------
    size_in : tuple of float
        Width and height, in inches.
    draw : callable
        Draws on the empty figure that it is given.

    Returns
    -------
    str
        SVG without date or random identifiers.
    """
    # The figure is made without pyplot: no global state, no display, half the import time.
    with matplotlib.rc_context(_RC):  # type: ignore[arg-type]
        figure = Figure(figsize=size_in)
        draw(figure)
        buffer = io.StringIO()
        figure.savefig(buffer, format="svg", metadata={"Date": None, "Creator": None})
    return buffer.getvalue().replace(_METRICS_FONT, _TYPESET_FONT)
