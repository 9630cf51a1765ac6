"""The distance law and the range against an independent ray trace with finite apertures."""

import json

import numpy as np
import pytest

from readout.angle.distance import clear_range, clipped_shift_per_metre, shift_per_metre
from readout.errors import BadInput
from tests.angle.traced_distance import traced_reading


def traced_shift(tilt, near_mm=300.0, far_mm=1300.0, **case):
    """Change of the traced reading over a metre."""
    near, far = (traced_reading(tilt, distance, **case)[0] for distance in (near_mm, far_mm))
    return (far - near) / (far_mm - near_mm) * 1e3


def test_the_value_of_the_design():
    """6.7" per metre for 600", 1 mm beyond the focus, 300 mm (derived by ray trace)."""
    shift = shift_per_metre(600.0, defocus_mm=1.0, focal_length_mm=300.0)
    assert shift == pytest.approx(-6.67, abs=0.005)


@pytest.mark.parametrize("reticle_mm", [0.0, 1.0, -2.0])
@pytest.mark.parametrize(("tilt", "defocus_mm"), [(600.0, 1.0), (-900.0, 0.5), (300.0, -2.0)])
def test_a_centred_mirror_smaller_than_the_beam(tilt, defocus_mm, reticle_mm):
    """The sensor's defocus alone counts, wherever the reticle is; the trace is unclipped."""
    case = {"defocus_mm": defocus_mm, "reticle_defocus_mm": reticle_mm, "mirror_mm": 12.0}
    assert traced_reading(tilt, 1300.0, **case)[1] == 1.0
    law = shift_per_metre(tilt, defocus_mm=defocus_mm, focal_length_mm=300.0)
    # Terms beyond the law: the mirror's edge cut obliquely, and the grid of rays at its rim.
    assert traced_shift(tilt, **case) == pytest.approx(law, abs=0.02 * abs(law))


@pytest.mark.parametrize(
    ("defocus_mm", "reticle_mm"), [(1.0, 0.0), (0.0, 1.0), (1.0, 1.0), (1.0, -1.0), (-1.5, 0.5)]
)
def test_where_the_objective_clips_the_return(defocus_mm, reticle_mm):
    """A mirror wider than the objective. Both off alike hide each other but for the second order,
    (d_r / f)(d / f) and L d_r / f^2 of the two shares: 0.5" here, as the design's trace found."""
    law = clipped_shift_per_metre(
        600.0, defocus_mm=defocus_mm, reticle_defocus_mm=reticle_mm, focal_length_mm=300.0
    )
    traced = traced_shift(
        600.0, defocus_mm=defocus_mm, reticle_defocus_mm=reticle_mm, mirror_mm=80.0
    )
    assert traced == pytest.approx(law, abs=0.5)
    alone = shift_per_metre(600.0, defocus_mm=defocus_mm, focal_length_mm=300.0)
    if reticle_mm == 0:
        assert traced == pytest.approx(alone / 2, rel=0.02)


def test_small_errors_follow_the_clipped_law_closely():
    """A twentieth of the defocus: the second order has gone to a four-hundredth."""
    for defocus_mm, reticle_mm in ((0.05, 0.0), (0.0, 0.05), (0.05, 0.05), (0.05, -0.05)):
        law = clipped_shift_per_metre(
            600.0, defocus_mm=defocus_mm, reticle_defocus_mm=reticle_mm, focal_length_mm=300.0
        )
        traced = traced_shift(
            600.0, defocus_mm=defocus_mm, reticle_defocus_mm=reticle_mm, mirror_mm=80.0
        )
        assert traced == pytest.approx(law, abs=0.004)


@pytest.mark.parametrize(
    ("distance_mm", "objective_mm", "mirror_mm"),
    [(500.0, 40.0, 20.0), (2000.0, 40.0, 25.0), (1000.0, 30.0, 12.0)],
)
def test_vignetting_begins_and_the_return_is_gone_where_the_trace_says(
    distance_mm, objective_mm, mirror_mm
):
    limits = clear_range(distance_mm, objective_mm=objective_mm, mirror_mm=mirror_mm)

    def share(tilt):
        return traced_reading(
            tilt, distance_mm, objective_mm=objective_mm, mirror_mm=mirror_mm, across=401
        )[1]

    # One step of the grid of rays at either rim.
    slack = objective_mm / 400 / distance_mm * 206265
    assert share(limits.whole_arcsec - slack) == 1
    assert 0.9 < share(limits.whole_arcsec + 3 * slack) < 1
    assert 0 < share(limits.gone_arcsec - 3 * slack) < 0.1
    assert share(limits.gone_arcsec + slack) == 0


def test_a_mirror_wider_than_the_objective_is_clipped_at_once():
    limits = clear_range(1000.0, objective_mm=40.0, mirror_mm=60.0)
    assert limits.whole_arcsec == 0
    assert limits.gone_arcsec == pytest.approx(0.02 * 206264.8, rel=1e-3)  # 2 t L = 40 mm
    assert "clipped at any tilt" in limits.words()


def test_the_range_as_words_and_json():
    limits = clear_range(1000.0, objective_mm=40.0, mirror_mm=20.0)
    assert limits.words() == (
        "at 1000 mm the return is whole up to 1031″ and gone at 3093″"  # 10 and 30 mm over 2 L
    )
    assert json.loads(json.dumps(limits.document(), allow_nan=False))["distance_mm"] == 1000


@pytest.mark.parametrize("bad", [0.0, -1.0, float("nan"), float("inf")])
def test_what_no_bench_has_is_refused(bad):
    with pytest.raises(BadInput, match=r"distance of .* cannot be: give a positive number"):
        clear_range(bad, objective_mm=40.0, mirror_mm=20.0)
    with pytest.raises(BadInput, match=r"focal length of .* cannot be"):
        shift_per_metre(600.0, defocus_mm=1.0, focal_length_mm=bad)


def test_tilts_of_any_shape():
    shift = shift_per_metre(np.array([0.0, 600.0]), defocus_mm=1.0, focal_length_mm=300.0)
    assert shift == pytest.approx([0.0, -6.6667], abs=1e-4)
