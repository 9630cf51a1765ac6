"""The budget as a table, and on the calibration's page."""

import re
from dataclasses import replace

import pytest

from readout.angle import nominal_calibration
from readout.angle.budget import Contribution
from readout.angle.budget_conditions import Conditions
from readout.angle.budget_reading import Seen, reading_budget
from readout.report.budget_table import HEADINGS, budget_html, budget_table, budget_text
from readout.report.calibration_page import calibration_page, farthest


def calibration():
    return nominal_calibration(
        focal_length_mm=300.0, pitch_um=3.45, image_width_px=1280, image_height_px=960
    )


def both(**more):
    seen = Seen(900.0, 300.0, cov_px2=(4e-4, 0.0, 9e-4), n=30, x_se_arcsec=0.2, y_se_arcsec=0.3)
    return reading_budget(calibration(), seen, Conditions(**more))


def test_every_line_is_there_and_the_shares_sum():
    budget = both(seating_arcsec=3.0)
    table = budget_table(budget)
    assert [row.cells[0] for row in table.lines] == [one.name for one in budget.x.contributions]
    for column in (4, 6):
        shares = [row.cells[column].removesuffix("\u00a0%") for row in table.lines]
        found = sum(float(share) for share in shares if share != "–")
        assert found == pytest.approx(100, abs=0.05 * len(shares))


def test_what_is_missing_is_a_dash_and_a_remark():
    table = budget_table(both())
    rows = {row.cells[0]: row.cells for row in table.lines}
    assert rows["air"][1:] == ("not stated", "–", "–", "–", "–", "–")
    assert table.remarks[0] == (
        "not stated, and missing in the sum: linearity, creep, air, seating"
    )
    assert "cross-talk" in table.remarks[1]


def test_the_figures_are_those_of_the_budget():
    budget = both(seating_arcsec=3.0)
    table = budget_table(budget)
    rows = {row.cells[0]: row.cells for row in (*table.lines, *table.sums)}
    assert rows["seating"][2] == "±3″, rectangular"
    assert rows["seating"][3] == "1.7"  # 3 / sqrt 3 = 1.73
    assert float(rows["combined"][3]) == pytest.approx(budget.x.combined_u, rel=0.05)
    assert float(rows["expanded, 95\u00a0%"][5]) == pytest.approx(budget.y.expanded_u, rel=0.05)
    assert rows["factor for 95\u00a0%"][3] == f"{budget.x.coverage_factor:.2f}"


def test_a_line_of_one_axis_alone():
    table = budget_table(both(further_y=(Contribution("table", 0.1, "arcsec"),)))
    assert table.lines[-1].cells == ("table", "stated", "normal", "–", "–", "0.10", "0.0\u00a0%")


def test_few_degrees_of_freedom_are_shown_cut_off():
    one = both(further_x=(Contribution("lever", 90.0, "arcsec", freedom=7.0),))
    rows = {row.cells[0]: row.cells for row in budget_table(one).sums}
    assert rows["degrees of freedom"][3:] == ("7", "", "∞", "")


def test_plain_text_is_aligned():
    lines = budget_text(both()).splitlines()
    starts = lines[0].index(HEADINGS[1])
    named = [line for line in lines if line.startswith(("noise", "air", "cross-talk"))]
    assert len(named) == 3
    assert all(line[starts - 1] == " " and line[starts] != " " for line in named)


def test_html_escapes_what_the_user_wrote():
    page = budget_html(both(further_x=(Contribution("<b>x</b>", 0.1, "arcsec", note="<i>"),)))
    assert "<b>x</b>" not in page
    assert "&lt;b&gt;x&lt;/b&gt;" in page
    assert "<i>" not in page


def test_the_page_holds_the_budget_of_its_farthest_point():
    made = replace(
        calibration(),
        residuals=tuple(
            {
                "file": f"{k}.png",
                "x_px": x,
                "y_px": 400.0,
                "x_residual_arcsec": 0.01,
                "y_residual_arcsec": None,
            }
            for k, x in enumerate((600.0, 1100.0, 300.0))
        ),
        residual_rms_arcsec=0.01,
        n=3,
    )
    assert (farthest(made).x_px, farthest(made).y_px) == (1100.0, 400.0)
    page = calibration_page(made)
    x = float(made.tilt(1100.0, 400.0)[0])
    assert f"at X +{x:.0f}″" in page
    cells = re.findall(r"<td>cross-talk.*?</td><td>(.*?)</td>", page, re.DOTALL)
    assert cells == ["default"]
    assert "not stated, and missing in the sum: noise, creep, air, seating" in page


def test_a_budget_of_ones_own_on_the_page():
    page = calibration_page(calibration(), both(seating_arcsec=3.0))
    assert "±3″, rectangular" in page
