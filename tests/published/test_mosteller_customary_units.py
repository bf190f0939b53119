"""Body surface area in the other published forms of the two formulas.

Mosteller RD. N Engl J Med 1987;317:1098: sqrt(in lb / 3131). Du Bois & Du Bois 1916 with height in metres:
0.20247 m^0.725 kg^0.425. An area is published to 0.01 m²; the 3131 of the letter is itself 0.2 % above the exact
3125 (3600 / 2.54 / 0.4536), which is 0.1 % of the area.
"""

import numpy as np
import pytest

from worksheet.oxygen.delivery import bsa_dubois, bsa_mosteller

PEOPLE = [(150.0, 45.0), (170.0, 70.0), (178.0, 82.0), (190.0, 120.0)]  # cm, kg


@pytest.mark.parametrize(("height", "weight"), PEOPLE)
def test_mosteller_in_inches_and_pounds(height, weight):
    published = np.sqrt(height / 2.54 * weight / 0.45359237 / 3131)
    assert bsa_mosteller(height, weight) == pytest.approx(published, abs=0.005)


@pytest.mark.parametrize(("height", "weight"), PEOPLE)
def test_dubois_in_metres(height, weight):
    published = 0.20247 * (height / 100) ** 0.725 * weight**0.425
    assert bsa_dubois(height, weight) == pytest.approx(published, rel=0.0002)  # five digits printed
