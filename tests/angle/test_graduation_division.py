"""What a division means, and the lines that ask for it."""

from __future__ import annotations

import math

import pytest

from readout.angle.graduation_division import MarkedAs, division
from readout.errors import BadInput

ARCSEC = math.pi / 180 / 3600


def test_mirror_tilt_turns_the_beam_by_exactly_twice_as_much() -> None:
    tilt = division(spacing_arcsec=10.0, marked_as=MarkedAs.MIRROR_TILT)
    beam = division(spacing_arcsec=10.0, marked_as=MarkedAs.BEAM_ANGLE)
    assert tilt.slope == 2 * beam.slope
    assert beam.slope == pytest.approx(10.0 * ARCSEC, rel=1e-14)


def test_a_width_needs_the_focal_length_it_stands_in() -> None:
    made = division(spacing_um=100.0, focal_length_mm=300.0)
    assert made.slope == pytest.approx(0.1 / 300.0, rel=1e-14)
    assert made.spacing_um == 100.0


def test_the_scale_as_a_whole_is_as_uncertain_as_ruling_and_focal_length_together() -> None:
    made = division(spacing_um=100.0, focal_length_mm=300.0, rel_sd=3e-4, focal_length_rel_sd=4e-4)
    assert made.rel_sd == pytest.approx(5e-4)
    assert division(spacing_um=100.0, focal_length_mm=300.0, rel_sd=3e-4).rel_sd is None
    assert division(spacing_arcsec=1.0, marked_as=MarkedAs.BEAM_ANGLE).rel_sd is None


@pytest.mark.parametrize(
    ("given", "says"),
    [
        ({}, "what a division of the scale means is not said"),
        ({"spacing_arcsec": 10.0}, "mirror_tilt.*beam_angle.*twice as much.*lever step"),
        ({"spacing_um": 100.0}, "needs the focal_length_mm"),
        ({"spacing_arcsec": 10.0, "spacing_um": 5.0}, "not both"),
        (
            {
                "spacing_arcsec": 10.0,
                "marked_as": MarkedAs.BEAM_ANGLE,
                "focal_length_mm": 300.0,
            },
            "needs no focal_length_mm",
        ),
        (
            {"spacing_um": 10.0, "focal_length_mm": 300.0, "marked_as": MarkedAs.BEAM_ANGLE},
            "no marked_as",
        ),
        ({"spacing_arcsec": -1.0, "marked_as": MarkedAs.BEAM_ANGLE}, "spacing_arcsec is -1"),
        ({"spacing_um": math.nan, "focal_length_mm": 1.0}, "spacing_um is nan"),
        ({"spacing_arcsec": 1.0, "marked_as": MarkedAs.BEAM_ANGLE, "rel_sd": 2.0}, "rel_sd is 2"),
    ],
)
def test_refuses_by_one_line_with_the_remedy(given: dict[str, object], says: str) -> None:
    with pytest.raises(BadInput, match=says) as refusal:
        division(**given)  # type: ignore[arg-type]  # options by name
    assert "\n" not in str(refusal.value)
