"""Acid-base and temperature: numbers worked by hand, edges of each domain, the slope that Newton uses."""

import numpy as np
import pytest

from worksheet.oxygen import acidbase
from worksheet.oxygen.acidbase import (
    base_excess_blood,
    base_excess_lang_zander,
    bicarbonate,
    pco2_at,
    pco2_at_37,
    ph_at,
    ph_at_37,
    po2_at,
    po2_at_37,
    standard_base_excess,
)

BELOW = -1e-9


@pytest.mark.parametrize(
    ("function", "given", "by_hand"),
    [
        (bicarbonate, (7.105, 40.0), 12.28),  # 0.0307 x 40 x 10
        (bicarbonate, (6.105, 40.0), 1.228),
        (standard_base_excess, (7.105, 40.0), 12.28 - 24.8 - 16.2 * 0.295),
        (standard_base_excess, (7.40, 0.0), -24.8),
        (base_excess_blood, (7.40, 0.0, 10.0), 0.86 * -24.8),
        (base_excess_blood, (7.50, 0.0, 10.0), 0.86 * (-24.8 + 22.0 * 0.1)),
        (base_excess_lang_zander, (7.40, 0.0, 10.0, 1.0), 0.857 * -24.26),
        (base_excess_lang_zander, (7.50, 0.0, 10.0, 0.5), 0.857 * (-24.26 + 25.8 * 0.1) - 1.0),
        (base_excess_lang_zander, (7.10, 40.0, 10.0, 1.0), 0.857 * (12.16 - 24.26 + 25.8 * -0.3)),
        (ph_at, (7.40, 27.0), 7.547),
        (ph_at, (7.00, 27.0), 7.00 - 10 * (-0.0147 + 0.0026)),
        (pco2_at, (40.0, 37.0), 40.0),
        (pco2_at, (40.0, 47.0), 40.0 * 10**0.19),
        (po2_at, (0.0, 20.0), 0.0),
        (po2_at, (1e-3, 38.0), 1e-3 * 10 ** (0.071 / 2.30)),  # the limit at no oxygen
        (po2_at, (1e5, 38.0), 1e5 * 10 ** (5.49e-11 / 9.72e-9)),  # the limit of dissolved oxygen alone
    ],
)
def test_worked_by_hand(function, given, by_hand):
    assert function(*given) == pytest.approx(by_hand, rel=1e-6)


@pytest.mark.parametrize(
    ("function", "inside", "outside"),
    [
        (bicarbonate, (7.4, 0.0), (7.4, BELOW)),
        (bicarbonate, (7.4, 0.5), (7.4, -0.5)),
        (base_excess_blood, (7.4, 40.0, 0.0), (7.4, 40.0, BELOW)),
        (base_excess_lang_zander, (7.4, 0.0, 10.0, 0.9), (7.4, BELOW, 10.0, 0.9)),
        (base_excess_lang_zander, (7.4, 40.0, 0.0, 0.9), (7.4, 40.0, BELOW, 0.9)),
        (base_excess_lang_zander, (7.4, 40.0, 10.0, 0.0), (7.4, 40.0, 10.0, BELOW)),
        (base_excess_lang_zander, (7.4, 40.0, 10.0, 1.0), (7.4, 40.0, 10.0, 1.0 + 1e-9)),
        (pco2_at, (0.0, 35.0), (BELOW, 35.0)),
        (pco2_at_37, (0.0, 35.0), (BELOW, 35.0)),
        (po2_at, (0.0, 35.0), (BELOW, 35.0)),
        (po2_at_37, (1e-6, 35.0), (0.0, 35.0)),
    ],
)
def test_edges_of_the_domain(function, inside, outside):
    assert np.isfinite(function(*inside))
    assert np.isnan(function(*outside))


@pytest.mark.parametrize("temperature", [18.0, 28.0, 37.0, 42.0])
def test_values_reported_at_body_temperature_are_taken_back(temperature):
    assert ph_at_37(ph_at(7.21, temperature), temperature) == pytest.approx(7.21, abs=1e-12)
    assert pco2_at_37(pco2_at(55.0, temperature), temperature) == pytest.approx(55.0, rel=1e-12)
    for po2 in (0.5, 30.0, 90.0, 140.0, 250.0, 700.0):
        assert po2_at_37(po2_at(po2, temperature), temperature) == pytest.approx(po2, rel=1e-12)


@pytest.mark.parametrize("po2", [1.0, 40.0, 90.0, 150.0, 300.0])
def test_slope_of_the_po2_exponent_is_the_numerical_one(po2):
    step = 1e-5
    above, _ = acidbase._po2_exponent(np.float64(po2 * np.exp(step)))
    below, _ = acidbase._po2_exponent(np.float64(po2 * np.exp(-step)))
    _, slope = acidbase._po2_exponent(np.float64(po2))
    assert slope == pytest.approx((above - below) / (2 * step), rel=1e-6, abs=1e-12)


def test_cold_blood_is_more_alkaline_with_lower_pressures():
    assert ph_at(7.4, 30.0) > 7.4
    assert pco2_at(40.0, 30.0) < 40.0
    assert po2_at(90.0, 30.0) < 90.0
