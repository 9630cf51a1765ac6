"""The budget of one angle: each line against the physics it stands for, the sum against draws."""

import json
import math
from dataclasses import replace

import numpy as np
import pytest

from readout.angle import Calibration, nominal_calibration, reading_of
from readout.angle.budget import Contribution, Standing
from readout.angle.budget_conditions import Conditions, parse_conditions
from readout.angle.budget_document import reading_budget_document
from readout.angle.budget_reading import Seen, reading_budget, seen_at
from readout.angle.distributions import Distribution
from readout.errors import BadInput
from readout.model import Observation, Quality, Sighting

SEED = 61401
ARCSEC = math.pi / 648000
NOISE_PX2 = (4e-4, 1e-4, 9e-4)


def calibration(**more):
    made = nominal_calibration(
        focal_length_mm=300.0, pitch_um=3.45, image_width_px=1280, image_height_px=960
    )
    return replace(made, **more)


def seen(x_arcsec, y_arcsec, **more):
    x, y = calibration().position(x_arcsec, y_arcsec)
    return Seen(float(x), float(y), **more)


def line(budget, name):
    (found,) = (one for one in budget.contributions if one.name == name)
    return found


def u(budget, name):
    return abs(line(budget, name).signed_u)


NOTHING_ELSE = Conditions(
    roll_mrad=0, axis_error_deg=0, p0_px=0, temperature_change_k=0, path_m=0, seating_arcsec=0
)


def test_noise_and_calibration_are_those_of_the_reading():
    """``reading_of`` joins the same two; both must come to one figure."""
    made, here = calibration(), seen(300.0, -120.0, cov_px2=NOISE_PX2)
    sighting = Sighting(here.x_px, here.y_px, NOISE_PX2, Quality(0))
    reading = reading_of(Observation(0, 0, 0, 1280, 960, sighting), made, 0.0)
    both = reading_budget(made, here, NOTHING_ELSE)
    assert both.x.value == pytest.approx(reading.x_arcsec, rel=1e-12)
    assert both.x.combined_u == pytest.approx(reading.x_u_arcsec, rel=1e-12)
    assert both.y.combined_u == pytest.approx(reading.y_u_arcsec, rel=1e-12)
    assert both.x.independent_u == pytest.approx(reading.x_sd_arcsec, rel=1e-12)


def test_averaging_lessens_the_noise_and_nothing_else():
    one = reading_budget(calibration(), seen(300.0, 50.0, cov_px2=NOISE_PX2), NOTHING_ELSE).x
    mean = seen(300.0, 50.0, cov_px2=NOISE_PX2, n=100, x_se_arcsec=0.5, y_se_arcsec=0.5)
    many = reading_budget(calibration(), mean, NOTHING_ELSE).x
    assert u(many, "noise") == pytest.approx(u(one, "noise") / 10, rel=1e-12)
    assert u(many, "calibration") == u(one, "calibration")
    # noise and what averaging leaves are together the standard error the readings showed
    assert math.hypot(u(many, "noise"), u(many, "averaging")) == pytest.approx(0.5, rel=1e-12)
    assert line(many, "averaging").freedom == 99
    assert line(one, "averaging").standing is Standing.NOT_APPLICABLE


def test_averaging_lessens_only_what_is_new_in_each_picture():
    given = Conditions(seating_arcsec=1.0, linearity_arcsec=1.0, path_m=10.0)
    mean = seen(300.0, 50.0, cov_px2=NOISE_PX2, n=100, x_se_arcsec=0.5, y_se_arcsec=0.5)
    budget = reading_budget(calibration(), mean, given, zero=seen(0.0, 0.0, cov_px2=NOISE_PX2)).x
    assert budget.independent_u == pytest.approx(0.5, rel=1e-12)
    assert math.hypot(budget.independent_u, budget.common_u) == pytest.approx(budget.combined_u)
    for name in ("calibration", "zero", "seating", "linearity", "air", "cross-talk"):
        assert line(budget, name).common
        assert u(budget, name) > 0


def test_nobody_has_said():
    """What is not known is named, never zero; what has a usual value is marked as that."""
    both = reading_budget(calibration(), Seen(800.0, 300.0), zero=Seen(600.0, 500.0))
    missing = ("noise", "linearity", "linearity at the zero", "zero", "drift since zero")
    for budget in (both.x, both.y):
        assert budget.named(Standing.NOT_STATED) == (*missing, "creep", "air", "seating")
        usual = ("calibration", "optical axis", "cross-talk", "cosine")
        assert budget.named(Standing.DEFAULT) == usual
        assert all(u(budget, name) > 0 for name in usual)


def test_a_calibration_without_covariance_says_so():
    bare = calibration(param_cov=tuple((0.0,) * 7 for _ in range(7)))
    assert line(reading_budget(bare, seen(9.0, 9.0)).x, "calibration").standing is (
        Standing.NOT_STATED
    )


def test_a_stated_zero_is_a_zero():
    budget = reading_budget(calibration(), seen(100.0, 100.0), NOTHING_ELSE).x
    for name in ("optical axis", "cross-talk", "cosine", "creep", "air", "seating"):
        assert line(budget, name).standing is Standing.STATED
        assert u(budget, name) == 0


def turned_about_the_optical_axis(x_arcsec, y_arcsec, rho_rad):
    """Exact: the mirror's normal turned about z, counter-clockwise from behind."""
    x, y = x_arcsec * ARCSEC, y_arcsec * ARCSEC
    n = np.array([math.sin(x) * math.cos(y), math.sin(y), math.cos(x) * math.cos(y)])
    c, s = math.cos(rho_rad), math.sin(rho_rad)
    n_x, n_y, n_z = c * n[0] - s * n[1], s * n[0] + c * n[1], n[2]
    return math.atan2(n_x, n_z) / ARCSEC, math.asin(n_y) / ARCSEC


def test_cross_talk_is_a_turn_of_the_mirror():
    """1 degree at X = 600″ gives Y = 10.5″, 1 mrad 0.6″ (computed by ray trace)."""
    budget = reading_budget(calibration(), seen(600.0, 0.0), Conditions(roll_mrad=1.0)).y
    assert line(budget, "cross-talk").sensitivity == pytest.approx(0.6, rel=1e-9)
    degree = 1e3 * math.radians(1)
    assert line(budget, "cross-talk").sensitivity * degree == pytest.approx(10.5, abs=0.05)
    both = reading_budget(calibration(), seen(300.0, -200.0))
    rho = 1e-3
    x, y = turned_about_the_optical_axis(300.0, -200.0, rho)
    assert line(both.x, "cross-talk").sensitivity == pytest.approx(x - 300.0, rel=2e-3)
    assert line(both.y, "cross-talk").sensitivity == pytest.approx(y + 200.0, rel=2e-3)


def test_cosine():
    """Turned by theta about an axis eps from square to the optical axis, exactly (Rodrigues): the
    tilt is short by theta (1 - cos eps), within the line's limits.
    """
    eps, theta = math.radians(2.0), 400.0
    budget = reading_budget(calibration(), seen(theta, 0.0), Conditions(axis_error_deg=2.0)).x
    axis = np.array([0.0, math.cos(eps), math.sin(eps)])
    angle = theta * ARCSEC
    n = np.array([0.0, 0.0, 1.0])
    turned = (
        n * math.cos(angle)
        + np.cross(axis, n) * math.sin(angle)
        + axis * (axis @ n) * (1 - math.cos(angle))
    )
    seen_x = math.atan2(turned[0], turned[2]) / ARCSEC
    limits = line(budget, "cosine").half_width * theta
    assert theta - seen_x == pytest.approx(limits, rel=1e-3)
    # an axis anywhere within its limits: the rms error is below what is claimed
    rng = np.random.default_rng(SEED)
    errors = theta * (1 - np.cos(rng.uniform(-eps, eps, 20_000)))
    print(f"seed {SEED}")
    assert 0.5 * u(budget, "cosine") < math.sqrt((errors**2).mean()) < u(budget, "cosine")


def test_optical_axis_moves_the_scale():
    """The tilt between two places, evaluated with p0 moved by one pixel along each side."""
    here, start = seen(300.0, -200.0), seen(40.0, 90.0)
    budget = reading_budget(calibration(), here, Conditions(p0_px=100.0), zero=start).x

    def change(dx, dy):
        made = calibration()
        moved = replace(made, p0_px=(made.p0_px[0] + dx, made.p0_px[1] + dy))
        tilts = [moved.tilt(one.x_px, one.y_px)[0] for one in (here, start)]
        return float(tilts[0] - tilts[1])

    slopes = [(change(*d) - change(-d[0], -d[1])) / 2 for d in ((1, 0), (0, 1))]
    assert line(budget, "optical axis").sensitivity == pytest.approx(math.hypot(*slopes), rel=1e-4)
    assert u(budget, "optical axis") < 0.0015  # 100 px are 0.0015″ at 300″ (computed)


def test_a_measured_axis_is_not_counted_twice():
    cov = np.diag([1e-16] * 4 + [4.0, 4.0, 0.0])
    measured = calibration(param_cov=tuple(map(tuple, cov.tolist())))
    found = line(reading_budget(measured, seen(10.0, 10.0)).x, "optical axis")
    assert found.standing is Standing.NOT_APPLICABLE
    stated = reading_budget(measured, seen(10.0, 10.0), Conditions(p0_px=5.0)).x
    assert line(stated, "optical axis").standing is Standing.STATED


def test_creep_and_air_and_drift():
    """1 µm is 0.34″ at 300 mm; 1 K/m over 1 m is 0.19″ (both computed from the optics)."""
    given = Conditions(
        creep_um_per_k=1.0,
        temperature_change_k=1.0,
        path_m=1.0,
        gradient_k_per_m=1.0,
        drift_arcsec_per_h=0.2,
        since_zero_h=3.0,
    )
    budget = reading_budget(calibration(), seen(5.0, 5.0), given, zero=seen(0.0, 0.0)).x
    limits = {
        name: line(budget, name).half_width * line(budget, name).sensitivity
        for name in ("creep", "air", "drift since zero")
    }
    assert limits["creep"] == pytest.approx(0.34, abs=0.005)
    assert limits["air"] == pytest.approx(0.19, abs=0.005)
    assert limits["drift since zero"] == pytest.approx(0.6)


def test_a_difference_knows_the_axis_and_the_scale():
    """The scale counts with the difference: 1 % of 10″ about a place at 600″."""
    sure = Seen(*(float(p) for p in calibration().position(600.0, 0.0)))
    budget = reading_budget(calibration(), seen(610.0, 0.0), zero=sure).x
    assert budget.value == pytest.approx(10.0, abs=1e-6)
    assert u(budget, "calibration") == pytest.approx(0.1, rel=1e-3)
    assert u(reading_budget(calibration(), seen(610.0, 0.0)).x, "calibration") > 6


def test_linearity():
    given = Conditions(linearity_arcsec=0.1, linearity_distribution=Distribution.ARCSINE)
    alone = reading_budget(calibration(), seen(5.0, 5.0), given).x
    assert u(alone, "linearity") == pytest.approx(0.1 / math.sqrt(2))
    both = reading_budget(calibration(), seen(5.0, 5.0), given, zero=seen(0.0, 0.0)).x
    assert u(both, "linearity at the zero") == pytest.approx(0.1 / math.sqrt(2))
    left_over = calibration(residual_rms_arcsec=0.03, n=15)
    usual = line(reading_budget(left_over, seen(5.0, 5.0)).x, "linearity")
    assert (usual.standing, usual.standard_uncertainty) == (Standing.DEFAULT, 0.03)


def test_the_zero_as_it_is_kept():
    made = calibration()
    zero = seen_at(made, 12.0, -7.0, n=50, x_se_arcsec=0.02, y_se_arcsec=0.03)
    budget = reading_budget(made, seen(12.0, -7.0), zero=zero).y
    assert budget.value == pytest.approx(0, abs=1e-9)
    assert u(budget, "zero") == 0.03
    assert line(budget, "zero").freedom == 49


def drawn_parameters(made: Calibration, rng, p0_px):
    cov = np.array(made.param_cov)
    flat = np.array([*made.matrix[0], *made.matrix[1], *made.p0_px, made.k1])
    root = np.linalg.eigh(cov)
    drawn = flat + root[1] @ (np.sqrt(np.maximum(root[0], 0)) * rng.standard_normal(7))
    return replace(
        made,
        matrix=((drawn[0], drawn[1]), (drawn[2], drawn[3])),
        p0_px=(drawn[4] + rng.uniform(-p0_px, p0_px), drawn[5] + rng.uniform(-p0_px, p0_px)),
    )


@pytest.mark.parametrize("with_zero", [False, True])
def test_the_sum_against_the_exact_model(with_zero):
    """JCGM 101: every input drawn, the exact geometry evaluated; no sensitivity is used.

    An absolute tilt counts from p0, so that its draws are taken from the place that is p0 here.
    """
    made = calibration()
    here = seen(420.0, -260.0, cov_px2=NOISE_PX2)
    start = seen(35.0, 80.0, cov_px2=NOISE_PX2) if with_zero else None
    given = Conditions(
        roll_mrad=20.0,
        axis_error_deg=0.0,
        p0_px=3000.0,
        linearity_arcsec=2.0,
        linearity_distribution=Distribution.ARCSINE,
        temperature_change_k=8.0,
        creep_um_per_k=1.5,
        path_m=20.0,
        gradient_k_per_m=1.0,
        seating_arcsec=4.0,
        drift_arcsec_per_h=1.0,
        since_zero_h=2.0,
        further_x=(Contribution("user", 2.0, "arcsec"),),
        further_y=(Contribution("user", 2.0, "arcsec"),),
    )
    both = reading_budget(made, here, given, zero=start)
    rng = np.random.default_rng(SEED + with_zero)
    trials = 6000
    root = np.linalg.cholesky([[NOISE_PX2[0], NOISE_PX2[1]], [NOISE_PX2[1], NOISE_PX2[2]]])
    results = np.empty((trials, 2))
    truth = made.tilt(here.x_px, here.y_px)
    um = np.array(made.scale_arcsec_per_px) / made.pitch_um
    for k in range(trials):
        wrong = drawn_parameters(made, rng, 3000.0)
        rolled = turned_about_the_optical_axis(*map(float, truth), rng.uniform(-0.02, 0.02))
        place = made.position(*rolled) + root @ rng.standard_normal(2)
        tilt = np.array(wrong.tilt(*place))
        if start is None:
            tilt -= np.array(wrong.tilt(*made.p0_px))
        else:
            there = np.array([start.x_px, start.y_px]) + root @ rng.standard_normal(2)
            tilt -= np.array(wrong.tilt(*there))
            tilt += 2.0 * np.sin(rng.uniform(0, 2 * math.pi, 2)) + rng.uniform(-2, 2, 2)
        tilt += 2.0 * np.sin(rng.uniform(0, 2 * math.pi, 2))
        tilt += rng.uniform(-8, 8, 2) * 1.5 * um
        tilt += rng.uniform(-1, 1, 2) * 20.0 * 0.93e-6 / ARCSEC
        tilt += rng.uniform(-4, 4, 2) + rng.normal(0, 2.0, 2)
        results[k] = tilt
    spread = results.std(axis=0, ddof=1)
    claimed = [both.x.combined_u, both.y.combined_u]
    print(f"seed {SEED + with_zero}: drawn {spread}, claimed {claimed}")
    assert spread == pytest.approx(claimed, rel=4 / math.sqrt(2 * trials))
    value = [both.x.value, both.y.value]
    assert results.mean(axis=0) == pytest.approx(value, abs=4 * max(spread) / math.sqrt(trials))
    shares = [one.signed_u**2 / both.x.combined_u**2 for one in both.x.contributions]
    assert max(shares) < 0.6  # no line hides the others


def test_as_json():
    document = reading_budget_document(
        calibration(),
        seen(300.0, 50.0, cov_px2=NOISE_PX2),
        {
            "roll_mrad": 2,
            "path_m": None,
            "further": [
                {"name": "table", "half_width": 0.2, "axis": "y", "distribution": "arcsine"},
                {"name": "supply", "standard_uncertainty": 2, "unit": "V", "arcsec_per_unit": 0.1},
            ],
        },
    )
    again = json.loads(json.dumps(document, allow_nan=False))
    assert again == document
    assert document["schema"] == "readout.budget/1"
    x, y = document["x"], document["y"]
    names = [one["name"] for one in x["lines"]]
    assert "table" not in names
    by_name = {one["name"]: one for one in y["lines"]}
    assert by_name["table"]["u_arcsec"] == pytest.approx(0.2 / math.sqrt(2))
    assert by_name["supply"]["u_arcsec"] == pytest.approx(0.2)
    assert by_name["cross-talk"]["half_width"] == pytest.approx(2)
    assert by_name["air"]["u_arcsec"] is None
    assert by_name["air"]["share"] is None
    assert "air" in y["not_stated"]
    assert "optical axis" in y["defaults"]
    assert x["effective_freedom"] is None
    assert x["expanded_u_arcsec"] == pytest.approx(x["coverage_factor"] * x["combined_u_arcsec"])
    assert sum(one["share"] or 0 for one in x["lines"]) == pytest.approx(1)
    assert x["combined_u_arcsec"] == pytest.approx(
        math.hypot(*(one["u_arcsec"] or 0 for one in x["lines"]))
    )


@pytest.mark.parametrize(
    ("given", "words"),
    [
        ({"rol_mrad": 1}, "no 'rol_mrad'"),
        ({"roll_mrad": "1"}, "roll_mrad is no number"),
        ({"roll_mrad": True}, "roll_mrad is no number"),
        ({"roll_mrad": -1}, "roll_mrad of -1 cannot be"),
        ({"path_m": math.nan}, "path_m of nan cannot be"),
        ({"linearity_distribution": "normal"}, "linearity is given by its limits"),
        ({"linearity_distribution": "square"}, "no distribution 'square'"),
        ({"further": {"name": "a"}}, "further is a list"),
        ({"further": [{"half_width": 1}]}, "no name"),
        ({"further": [{"name": "a"}]}, "a: give either"),
        (
            {"further": [{"name": "a", "half_width": 1, "standard_uncertainty": 1}]},
            "a: give either",
        ),
        ({"further": [{"name": "a", "half_width": 1, "distribution": "normal"}]}, "a: a normal"),
        ({"further": [{"name": "a", "half_width": 1, "axis": "z"}]}, "axis is x or y"),
        ({"further": [{"name": "a", "half_width": 1, "common": 3}]}, "common is true or false"),
        ({"further": [{"name": "a", "half_width": 1, "unit": 3}]}, "unit and note are words"),
        ({"further": [{"name": "a", "half_width": 1, "sd": 3}]}, "a: there is no 'sd'"),
        ({"further": [{"name": "a", "half_width": 1, "freedom": 0}]}, "degrees of freedom"),
    ],
)
def test_conditions_that_cannot_be(given, words):
    with pytest.raises(BadInput, match=words) as raised:
        parse_conditions(given)
    assert "\n" not in str(raised.value)


def test_a_name_of_the_budget_cannot_be_taken():
    given = {"further": [{"name": "air", "half_width": 1}]}
    with pytest.raises(BadInput, match="two lines are called 'air'"):
        reading_budget_document(calibration(), seen(1.0, 1.0), given)


def test_nothing_sighted():
    with pytest.raises(BadInput, match="nothing was sighted"):
        Seen(math.nan, 3.0)
    with pytest.raises(BadInput, match="average of 0"):
        Seen(1.0, 3.0, n=0)
