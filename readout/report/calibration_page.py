"""A calibration on one page: the answer, where the points were, what is left over."""

from __future__ import annotations

import io
import math
from functools import cache
from typing import Any

from jinja2 import Environment, PackageLoader, Template

from readout.angle import Calibration
from readout.angle.budget_reading import Seen, TiltBudget, reading_budget
from readout.report.budget_table import budget_html
from readout.report.style import FAINT, FIGURE, INK, PAPER, TILT_X, TILT_Y
from readout.units import decimals_for, signed

MM_WIDE, MM_HIGH = 170.0, 110.0


def calibration_page(calibration: Calibration, budget: TiltBudget | None = None) -> str:
    """The page as HTML that needs nothing from outside.

    ``budget``: of a reading made with it; without one, of a reading at the farthest place used.
    """
    shown = reading_budget(calibration, farthest(calibration)) if budget is None else budget
    return _template().render(
        budget=budget_html(shown),
        budget_at=[signed(one.value, 0) for one in (shown.x, shown.y)],
        calibration=calibration,
        focal=_focal_words(calibration),
        rotation=signed(calibration.rotation_deg, 3),
        figure=residual_figure(calibration),
        rows=[_row(residual) for residual in calibration.residuals],
        paper=PAPER,
        ink=INK,
        faint=FAINT,
    )


def farthest(calibration: Calibration) -> Seen:
    """The place farthest from the axis that was used, else half-way to the picture's corner."""
    axis_x, axis_y = calibration.p0_px
    places = [(float(r["x_px"]), float(r["y_px"])) for r in calibration.residuals]
    if not places:
        right, bottom = calibration.image_width_px - 1, calibration.image_height_px - 1
        places = [((axis_x + right) / 2, (axis_y + bottom) / 2)]
    return Seen(*max(places, key=lambda place: math.hypot(place[0] - axis_x, place[1] - axis_y)))


@cache
def _template() -> Template:
    loader = PackageLoader("readout.report")
    return Environment(loader=loader, autoescape=True).get_template("calibration.html")


def _focal_words(calibration: Calibration) -> list[str]:
    """Focal length in pixels and, where the pitch is known, in millimetres."""
    units = [("px", 1.0)]
    if calibration.pitch_um is not None:
        units.append(("mm", calibration.pitch_um * 1e-3))
    words = []
    for unit, per_px in units:
        focal, sd = calibration.focal_length_px * per_px, calibration.focal_length_px_sd * per_px
        decimals = decimals_for(sd)
        words.append(f"{focal:.{decimals}f} ± {sd:.{decimals}f} {unit}")
    return words


def _row(residual: dict[str, Any]) -> tuple[str, str, str, str, str]:
    x, y = residual["x_residual_arcsec"], residual["y_residual_arcsec"]
    return (
        residual["file"],
        f"{residual['x_px']:.3f}",
        f"{residual['y_px']:.3f}",
        signed(math.nan if x is None else x, 4),
        signed(math.nan if y is None else y, 4),
    )


def residual_figure(calibration: Calibration) -> str:
    """The points in the picture with their residuals as strokes, as an SVG element.

    The strokes' scale is written in the figure: X along the picture's width, Y along its height.
    """
    import matplotlib as mpl
    from matplotlib.figure import Figure

    residuals = calibration.residuals
    left = [r[key] or 0.0 for r in residuals for key in ("x_residual_arcsec", "y_residual_arcsec")]
    largest = max((abs(value) for value in left), default=0.0) or 1.0
    stroke_arcsec = 10 ** math.floor(math.log10(largest))
    px_per_arcsec = calibration.image_width_px / 16 / largest
    with mpl.rc_context(FIGURE):
        figure = Figure(figsize=(MM_WIDE / 25.4, MM_HIGH / 25.4), layout="constrained")
        axes = figure.add_subplot()
        for r in residuals:
            x, y = r["x_px"], r["y_px"]
            if r["x_residual_arcsec"] is not None:
                to = x + r["x_residual_arcsec"] * px_per_arcsec
                axes.plot([x, to], [y, y], color=TILT_X, linewidth=1.6)
            if r["y_residual_arcsec"] is not None:
                to = y - r["y_residual_arcsec"] * px_per_arcsec
                axes.plot([x, x], [y, to], color=TILT_Y, linewidth=1.6, linestyle=(0, (3, 1)))
            axes.plot(x, y, "o", color=INK, markersize=2.5)
        axes.set(
            xlim=(-0.5, calibration.image_width_px - 0.5),
            ylim=(calibration.image_height_px - 0.5, -0.5),
            xlabel="picture x, px",
            ylabel="picture y, px",
            aspect="equal",
        )
        axes.set_title(
            f"what is left over, X solid, Y dashed: {stroke_arcsec:g}″ is "
            f"{stroke_arcsec * px_per_arcsec:.0f} px of stroke",
            loc="left",
            fontsize=9,
        )
        buffer = io.StringIO()
        figure.savefig(
            buffer, format="svg", metadata=dict.fromkeys(("Date", "Creator", "Format", "Type"))
        )
    svg = buffer.getvalue()
    return svg[svg.index("<svg") :]
