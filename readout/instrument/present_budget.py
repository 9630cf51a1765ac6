"""The uncertainty budget of what the instrument shows now."""

from __future__ import annotations

from readout.angle.budget_conditions import Conditions
from readout.angle.budget_reading import Seen, TiltBudget, reading_budget, seen_at
from readout.angle.calibration import Calibration
from readout.errors import NotNow
from readout.instrument.instrument import Instrument
from readout.instrument.zero import Zero


def present_budget(instrument: Instrument, conditions: Conditions) -> TiltBudget:
    """Of the averaged value, from zero where one is set; of the newest reading where the average
    is void.

    Raises NotNow where there is no angle.
    """
    newest, calibration = instrument.newest, instrument.calibration
    if newest is None or calibration is None or not newest[0].sighting.found:
        raise NotNow("there is no angle to add up: give a scale, and wait for a reading")
    sighting, average = newest[0].sighting, instrument.average()
    place = sighting.x_px, sighting.y_px
    seen = Seen(*place, sighting.cov_px2)
    if average is not None and average.valid:
        x_px, y_px = calibration.position(average.x_arcsec, average.y_arcsec)
        seen = Seen(
            float(x_px),
            float(y_px),
            sighting.cov_px2,
            average.n,
            average.x_se_arcsec,
            average.y_se_arcsec,
        )
    zero = instrument.zero
    start = None if zero is None else _seen_zero(calibration, zero)
    return reading_budget(calibration, seen, conditions, zero=start)


def _seen_zero(calibration: Calibration, zero: Zero) -> Seen:
    return seen_at(
        calibration,
        zero.x_arcsec,
        zero.y_arcsec,
        n=zero.n,
        x_se_arcsec=zero.x_sd_arcsec,
        y_se_arcsec=zero.y_sd_arcsec,
    )
