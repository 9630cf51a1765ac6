"""The look of what is printed: ink on paper, the same two colours for X and Y as on the screen."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from matplotlib.typing import RcKeyType

PAPER = "#f6f3ea"
INK = "#1b2226"
FAINT = "#6b6f6c"
TILT_X = "#0b6e75"
TILT_Y = "#a65a00"

FIGURE: dict[RcKeyType, Any] = {
    "figure.facecolor": PAPER,
    "axes.facecolor": PAPER,
    "axes.edgecolor": INK,
    "axes.labelcolor": INK,
    "axes.linewidth": 0.8,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "text.color": INK,
    "xtick.color": INK,
    "ytick.color": INK,
    "font.size": 9,
    "svg.fonttype": "none",
    "svg.hashsalt": "readout",
}
"""Settings of a figure: hairlines, no frame, text kept as text, the same file for the same data."""
