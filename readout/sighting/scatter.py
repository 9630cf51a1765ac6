"""Whether the line scatters along the arm by more than the noise of its pixels explains.

Each row by itself says, faintly, by how much the line is off there: the matched sum of its
residuals with the flanks. Rows are joined to sections, and the sections' shifts compared with what
their pixels' noise allows. Independent noise gives a reduced chi-square of 1. Noise that is
correlated from pixel to pixel (interpolated colours, denoising, compression), dust on the arm or
an arm that is not straight give more, and the covariance is widened by it: the Birge ratio
(R. T. Birge, Phys. Rev. 40 (1932) 207).
"""

from __future__ import annotations

import numpy as np

from readout.sighting.fold import Fold, Strip
from readout.sighting.solve import Solution

SECTIONS = 64
LEAST_ROWS = 4
"""rows in a section, at least: correlation over fewer rows than this is seen in full"""


def excess_variance(strip: Strip, fold: Fold, solution: Solution) -> float:
    """Reduced chi-square of the sections' shifts about the fitted line, at least 1."""
    rows = len(strip.rows)
    sections = min(SECTIONS, rows // LEAST_ROWS)
    if sections < 8:
        return 1.0
    matched = (solution.weight * solution.flank)[fold.group]
    expected = solution.model[fold.group] + solution.flank[fold.group] * fold.deviation[:, None]
    pull = np.einsum("rc,rc->r", matched, strip.levels - expected)
    information = np.einsum("rc,rc->r", matched, solution.flank[fold.group])
    first = np.arange(sections) * rows // sections
    pulls, informations = np.add.reduceat(pull, first), np.add.reduceat(information, first)
    along = np.add.reduceat(strip.along, first) / np.diff(np.append(first, rows))
    design = np.stack([np.ones(sections), along], axis=1)
    root = np.sqrt(informations)
    about_line = pulls / root - root * (
        design @ np.linalg.lstsq(design * root[:, None], pulls / root, rcond=None)[0]
    )
    return max(1.0, float(about_line @ about_line) / (sections - 2))
