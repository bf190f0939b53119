"""Severinghaus JW. Simple, accurate equations for human blood O2 dissociation computations.

J Appl Physiol 1979;46:599-602. Table 1: the standard curve at pH 7.40, PCO2 40 mmHg, 37 °C (51 points). The paper
states the largest deviation of its equation 1 from the table as 0.0055; equations 3 and 4 are its coefficients of
temperature and pH.
"""

import numpy as np
import pytest

from worksheet.oxygen.acidbase import po2_at
from worksheet.oxygen.curve import po2_ellis, saturation_severinghaus, saturation_tanh, severinghaus_ph_coefficient

PO2 = [
    1, 2, 4, 6, 8, 10, 12, 14, 16, 18, 20, 22, 24, 26, 28, 30, 32, 34, 36, 38, 40, 42, 44, 46, 48, 50, 52, 54, 56, 58,
    60, 65, 70, 75, 80, 85, 90, 95, 100, 110, 120, 130, 140, 150, 175, 200, 225, 250, 300, 400, 500,
]  # fmt: skip
PERCENT = [
    0.60, 1.19, 2.56, 4.37, 6.68, 9.58, 12.96, 16.89, 21.40, 26.50, 32.12, 37.60, 43.14, 48.27, 53.16, 57.54, 61.69,
    65.16, 68.63, 71.94, 74.69, 77.29, 79.55, 81.71, 83.52, 85.08, 86.59, 87.70, 88.93, 89.95, 90.85, 92.73, 94.06,
    95.10, 95.84, 96.42, 96.88, 97.25, 97.49, 97.91, 98.21, 98.44, 98.62, 98.77, 99.03, 99.20, 99.32, 99.41,
    99.53, 99.65, 99.72,
]  # fmt: skip
POINTS = list(zip(PO2, PERCENT, strict=True))
STATED_ERROR = 0.0055


@pytest.mark.parametrize(("po2", "percent"), POINTS)
def test_equation_1_meets_its_stated_error(po2, percent):
    # the table is printed to 0.01 %
    assert abs(saturation_severinghaus(po2) - percent / 100) <= STATED_ERROR + 0.00005


def test_the_stated_error_is_reached_and_not_more():
    worst = np.abs(saturation_severinghaus(PO2) - np.array(PERCENT) / 100).max()
    assert worst == pytest.approx(STATED_ERROR, abs=0.00006)


@pytest.mark.parametrize(("po2", "percent"), POINTS)
def test_the_default_curve_is_closer_to_the_table_than_that(po2, percent):
    assert abs(saturation_tanh(po2) - percent / 100) <= 0.0045


def test_the_default_curve_fits_better_than_equation_1_overall():
    table = np.array(PERCENT) / 100
    tanh, equation_1 = saturation_tanh(PO2) - table, saturation_severinghaus(PO2) - table
    assert np.sqrt(np.mean(tanh**2)) < np.sqrt(np.mean(equation_1**2))


@pytest.mark.parametrize("percent", [10, 26.50, 50, 74.69, 90.85, 96.42])
def test_inverse_meets_the_same_error(percent):
    po2 = po2_ellis(percent / 100)
    assert abs(np.interp(po2, PO2, PERCENT) - percent) <= 100 * STATED_ERROR + 0.1  # 0.1: between the table's points


@pytest.mark.parametrize(
    ("po2", "coefficient"),
    [(26.6, -1.2), (0.0, -2.2)],  # equation 4 at its reference PO2 and at its limit
)
def test_equation_4_coefficient_of_ph(po2, coefficient):
    assert severinghaus_ph_coefficient(po2) == pytest.approx(coefficient, abs=1e-12)


@pytest.mark.parametrize("po2", [20.0, 40.0, 60.0, 80.0, 100.0, 150.0, 300.0])
def test_equation_3_coefficient_of_temperature_is_the_one_used_to_correct_po2(po2):
    step = 1e-4
    measured = (np.log(po2_at(po2, 37 + step)) - np.log(po2_at(po2, 37 - step))) / (2 * step)
    published = 0.058 / (0.243 * (po2 / 100) ** 3.88 + 1) + 0.013
    assert measured == pytest.approx(published, abs=0.0005)  # printed to 0.001 per kelvin
