"""An observation in pixels becomes a reading in arc-seconds."""

from __future__ import annotations

import math

import numpy as np

from readout.angle.calibration import Calibration
from readout.model import Observation, Reading
from readout.sighting.lone_arm import LARGEST_SD_PX, with_its_range


def reading_of(observation: Observation, calibration: Calibration | None, t_s: float) -> Reading:
    """The tilt for one observation; NaN angles where there is no position or no calibration.

    The combined uncertainty joins the noise of this row with the calibration's share at its
    place, uncorrelated with each other (JCGM 100:2008, 5.1.2). Of a lone arm only the angle is
    given that does not depend on where along the arm the crossing lies.
    """
    sighting = observation.sighting
    point = (
        (sighting.x_px, sighting.y_px, sighting.cov_px2)
        if sighting.found
        else with_its_range(sighting, observation.width_px, observation.height_px)
    )
    x = y = x_sd = y_sd = x_u = y_u = math.nan
    if calibration is not None and point is not None:
        where, cov_px2 = point[:2], point[2]
        x, y = (float(tilt) for tilt in calibration.tilt(*where))
        noise = calibration.noise_cov(*where, cov_px2)
        common = calibration.calibration_cov(*where)
        x_sd, y_sd = math.sqrt(noise[0, 0]), math.sqrt(noise[1, 1])
        # A covariance without a share along an axis may be negative there in its last digits.
        x_u = math.sqrt(noise[0, 0] + max(0.0, common[0, 0]))
        y_u = math.sqrt(noise[1, 1] + max(0.0, common[1, 1]))
        limit = LARGEST_SD_PX * np.sqrt(np.diag(calibration.noise_cov(*where, (1.0, 0.0, 1.0))))
        if not sighting.found and x_sd > limit[0]:
            x = x_sd = x_u = math.nan
        if not sighting.found and y_sd > limit[1]:
            y = y_sd = y_u = math.nan
    return Reading(
        seq=observation.seq,
        t_s=t_s,
        t_utc_ns=observation.t_utc_ns,
        x_arcsec=x,
        y_arcsec=y,
        x_sd_arcsec=x_sd,
        y_sd_arcsec=y_sd,
        x_u_arcsec=x_u,
        y_u_arcsec=y_u,
        x_px=sighting.x_px,
        y_px=sighting.y_px,
        x_sd_px=sighting.x_sd_px,
        y_sd_px=sighting.y_sd_px,
        quality=sighting.quality,
        calibration_id=calibration.id if calibration else None,
        name=observation.name,
        signs=calibration.signs if calibration else None,
    )
