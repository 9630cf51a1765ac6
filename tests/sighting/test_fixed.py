"""Fixed light taken away: nothing is found in it, and a return over it is right to its claim.

Truth is the simulator's throughout. A covered-mirror frame is the mean of frames with a noise of
their own.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest

from readout.model import F64, Pixels, Quality, Sighting, Target
from readout.sighting import locate
from readout.sighting.prepare import Preparation
from readout.sighting.response import power_response
from readout.simulation import Crosshair, Sensor, crosshair_image, expose
from readout.simulation.blemishes import graduated_scale, second_return
from readout.simulation.response import display_encoded
from readout.simulation.spot import Spot, spot_image

SHAPE = (240, 320)
SENSOR = Sensor(8, gain_levels_per_electron=0.02, read_noise_electrons=6.0, black_levels=4.0)
GROUND = 400.0
RETURN = Crosshair(line_px=4.0, blur_px=1.6, background=0.0, contrast=6000.0)
FIXED = Crosshair(line_px=3.0, blur_px=1.4, background=0.0, contrast=3000.0)
FIXED_PX = (163.3, 117.6)
SCALE = graduated_scale(SHAPE, at_px=100.0, upright=True) * graduated_scale(SHAPE, at_px=90.0)
FIXED_LIGHT: dict[str, F64] = {
    "crosshair": GROUND + crosshair_image(SHAPE, *FIXED_PX, FIXED),
    "turned": GROUND
    + crosshair_image(SHAPE, *FIXED_PX, replace(FIXED, rotation_deg=33.0, line_px=1.5)),
    "dark": crosshair_image(
        SHAPE, *FIXED_PX, replace(FIXED, background=7000.0, contrast=-5000.0)
    ),
    "scale": GROUND
    + 4000.0 * (1 - SCALE),
    "spot": GROUND + spot_image(SHAPE, *FIXED_PX, Spot(8.0, 1.6, background=0.0, contrast=5000.0)),
}  # fmt: skip


def covered(light: F64, rng: np.random.Generator, frames: int = 16) -> Preparation:
    return Preparation().with_fixed(expose(light, SENSOR, rng) for _ in range(frames))


@pytest.mark.parametrize("target", list(Target))
@pytest.mark.parametrize("name", FIXED_LIGHT)
def test_what_is_fixed_alone_is_no_image(name: str, target: Target) -> None:
    rng = np.random.default_rng(31)
    light = FIXED_LIGHT[name]
    for _ in range(12):
        known = covered(light, rng)
        found = locate(expose(light, SENSOR, rng), full_scale=255, target=target, preparation=known)
        assert found.quality is Quality.NO_IMAGE
        assert math.isnan(found.x_px)
        assert math.isnan(found.y_px)


def test_a_fixed_crosshair_alone_is_a_perfect_false_target() -> None:
    """What it is taken for: without the covered-mirror frame nothing tells it from a return."""
    found = locate(
        expose(FIXED_LIGHT["crosshair"], SENSOR, np.random.default_rng(32)), full_scale=255
    )
    assert found.quality is Quality.OK
    assert found.x_px == pytest.approx(FIXED_PX[0], abs=0.01)


def test_a_fixed_crosshair_beside_the_return_is_said() -> None:
    rng = np.random.default_rng(33)
    light = FIXED_LIGHT["crosshair"] + crosshair_image(SHAPE, 120.2, 150.9, RETURN)
    assert Quality.SEVERAL_RETURNS in locate(expose(light, SENSOR, rng), full_scale=255).quality


def errors_over(
    place: Callable[[np.random.Generator], tuple[float, float]], *, frames: int, covers: int
) -> tuple[F64, F64]:
    """Errors, and errors by the claimed sd, of a return at ``place`` over the fixed crosshair."""
    errors, scaled = [], []
    for k in range(frames):
        rng = np.random.default_rng((34, k))
        x, y = place(rng)
        light = FIXED_LIGHT["crosshair"]
        known = covered(light, rng, covers)
        pixels = expose(light + crosshair_image(SHAPE, x, y, RETURN), SENSOR, rng)
        found = locate(pixels, full_scale=255, preparation=known)
        assert found.quality is Quality.OK
        errors += [found.x_px - x, found.y_px - y]
        scaled += [errors[-2] / found.x_sd_px, errors[-1] / found.y_sd_px]
    return np.array(errors), np.array(scaled)


def anywhere(rng: np.random.Generator) -> tuple[float, float]:
    return float(rng.uniform(60, 260)), float(rng.uniform(50, 190))


def upon_it(rng: np.random.Generator) -> tuple[float, float]:
    x, y = np.array(FIXED_PX) + rng.uniform(-4, 4, 2)
    return float(x), float(y)


@pytest.mark.parametrize("place", [anywhere, upon_it])
@pytest.mark.parametrize("covers", [2, 16])
def test_a_return_over_it_is_right_to_its_claim(
    place: Callable[[np.random.Generator], tuple[float, float]], covers: int
) -> None:
    """120 errors: the share within one sd has a standard error of 0.042, their mean one of 0.09 sd.

    A claim may be cautious where the line that was taken away left its noise.
    """
    errors, scaled = errors_over(place, frames=60, covers=covers)
    assert abs(scaled.mean()) < 4 / math.sqrt(scaled.size)
    assert 0.683 - 3 * 0.042 < np.mean(np.abs(scaled) < 1) < 0.88
    assert np.mean(np.abs(scaled) < 2) > 0.9
    assert np.abs(scaled).max() < 4.5
    assert errors.std() < 0.003


def test_a_return_is_followed_across_the_fixed_crosshair() -> None:
    """Half a pixel a frame, from one side to the other, each sighting from the one before."""
    rng = np.random.default_rng(35)
    light = FIXED_LIGHT["crosshair"]
    known, before = covered(light, rng), None
    tracked = 0
    for step in np.arange(-12, 12.5, 0.5):
        x, y = FIXED_PX[0] + step, FIXED_PX[1] - 0.8 * step
        pixels = expose(light + crosshair_image(SHAPE, x, y, RETURN), SENSOR, rng)
        found: Sighting = locate(pixels, full_scale=255, prior=before, preparation=known)
        assert found.quality is Quality.OK
        assert abs(found.x_px - x) < 5 * found.x_sd_px < 0.02
        assert abs(found.y_px - y) < 5 * found.y_sd_px < 0.02
        tracked, before = max(tracked, found.tracked), found
    assert tracked > 10


def test_a_spot_over_fixed_light_is_right_to_its_claim() -> None:
    scaled = []
    light = FIXED_LIGHT["crosshair"]
    for k in range(40):
        rng = np.random.default_rng((36, k))
        x, y = anywhere(rng)
        spot = spot_image(SHAPE, x, y, Spot(8.0, 1.6, background=0.0, contrast=6000.0))
        found = locate(
            expose(light + spot, SENSOR, rng),
            full_scale=255,
            target=Target.SPOT,
            preparation=covered(light, rng),
        )
        assert found.quality is Quality.OK
        scaled += [(found.x_px - x) / found.x_sd_px, (found.y_px - y) / found.y_sd_px]
    assert abs(np.mean(scaled)) < 4 / math.sqrt(len(scaled))
    assert 0.683 - 3 * 0.052 < np.mean(np.abs(scaled) < 1) < 0.88
    assert np.abs(scaled).max() < 4.5


class TestLight:
    """A line with a side lobe of 10 %, 30 % more light, a camera of gamma 0.45, 8 bit."""

    DEEP = Sensor(12, gain_levels_per_electron=0.4, read_noise_electrons=6.0)
    PLACE = (160.27, 118.84)

    def shift_px(self, known: Preparation) -> tuple[F64, float, Quality]:
        """Mean shift of x and y with the light, its standard error, and the words of all."""
        lines = replace(RETURN, background=GROUND)
        light = crosshair_image(SHAPE, *self.PLACE, lines)
        light = light + second_return(SHAPE, *self.PLACE, lines, strength=0.1, offset_px=(6.0, 6.0))
        rng = np.random.default_rng(37)
        words, places = Quality.OK, []
        for bright in (1.0, 1.3):
            found = [
                locate(self._shown(bright * light, rng), full_scale=255, preparation=known)
                for _ in range(40)
            ]
            places.append(np.array([(f.x_px, f.y_px) for f in found]))
            for each in found:
                words |= each.quality
        se = math.sqrt(sum(p.var(axis=0).max() for p in places) / 40)
        return places[1].mean(axis=0) - places[0].mean(axis=0), se, words

    def _shown(self, electrons: F64, rng: np.random.Generator) -> Pixels:
        return display_encoded(expose(electrons, self.DEEP, rng), self.DEEP.full_scale, gamma=0.45)

    def test_the_place_stays_once_the_curve_is_undone(self) -> None:
        shift, se, words = self.shift_px(Preparation(response=power_response(0.45, 255)))
        assert words is Quality.OK
        assert np.abs(shift).max() < 0.001 + 3 * se
        assert se < 0.0005

    def test_else_it_is_said(self) -> None:
        _, _, words = self.shift_px(Preparation())
        assert Quality.SEVERAL_RETURNS in words
