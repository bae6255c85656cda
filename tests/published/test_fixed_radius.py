"""Calculated fixed radius and the printed rules for uniform flow (checks 7a to 7d)."""

import math

import pytest
from wellshed.tracing.fixed_radius import (
    filling_radius,
    recharge_radius,
    uniform_flow_reach_illinois,
    volume_radius,
    volume_radius_illinois,
)


def test_epa_example_in_feet_and_years():
    # US EPA 1987, EPA 440/6-87-010, chapter 4; inputs and the printed 1138 ft from memory
    r = volume_radius(48793668, 5, 0.2, 300)
    assert r == pytest.approx(1137.669654, rel=1e-9)
    assert r == pytest.approx(1138, rel=5e-3)


def test_illinois_appendix_a():
    # 35 Ill. Adm. Code 671, appendix A; 4524 stands for 1440 pi
    assert volume_radius_illinois(30000, 2628000, 0.21, 40) == pytest.approx(1440.36436, rel=1e-9)
    assert volume_radius(30000, 2628000 / 1440, 0.21, 40) == pytest.approx(1440.381326, rel=1e-9)


def test_illinois_appendix_c():
    # 35 Ill. Adm. Code 671, appendix C; Y is the full width
    x, y = uniform_flow_reach_illinois(30000, 20000, 0.004)
    assert (x, y) == pytest.approx((446.25, 2805), rel=1e-9)
    gallons = 1728 / 231  # gallons in a cubic foot, by definition of the US gallon
    assert gallons * 30000 / (2 * math.pi * 20000 * 0.004) == pytest.approx(446.4606196, rel=1e-9)
    assert x == pytest.approx(446.4606196, rel=5e-4)
    assert y == pytest.approx(2805.194805, rel=1e-4)


def test_recharge_and_storage_together():
    # US EPA 1987; the combined radius is derived from continuity
    assert volume_radius(450, 365, 0.22, 18) == pytest.approx(114.9026804, rel=1e-9)
    assert recharge_radius(450, 0.0007) == pytest.approx(452.3580263, rel=1e-9)
    assert filling_radius(450, 365, 0.22, 18, 0.0007) == pytest.approx(113.0739676, rel=1e-9)


def test_combined_radius_joins_its_two_limits():
    assert filling_radius(450, 365, 0.22, 18, 1e-12) == pytest.approx(volume_radius(450, 365, 0.22, 18), rel=1e-9)
    assert filling_radius(450, 1e7, 0.22, 18, 0.0007) == pytest.approx(recharge_radius(450, 0.0007), rel=1e-12)


@pytest.mark.parametrize(
    ("function", "args", "word"),
    [
        (volume_radius, (-1, 365, 0.2, 18), "rate"),
        (volume_radius, (450, 365, 0, 18), "porosity"),
        (volume_radius, (450, 365, 1.2, 18), "porosity"),
        (volume_radius, (450, math.nan, 0.2, 18), "time"),
        (recharge_radius, (450, 0), "recharge"),
        (filling_radius, (450, 365, 0.2, 18, -0.1), "recharge"),
        (volume_radius_illinois, (450, 365, 0.2, 0), "thickness"),
        (uniform_flow_reach_illinois, (450, 0, 0.1), "transmissivity"),
        (uniform_flow_reach_illinois, (450, 10, math.inf), "gradient"),
    ],
)
def test_values_without_meaning_are_refused_by_name(function, args, word):
    with pytest.raises(ValueError, match=word):
        function(*args)
