"""Douglas AR, Jones NL, Reed JW. Calculation of whole blood CO2 content. J Appl Physiol 1988;65:473-477.

Table 3 (samples of Loeppky 1983): content of plasma as the paper's equation gives it (printed to 0.01 mL/dL), and
content of blood as measured. Against all 38 measured samples the equation's SD is 1.15 mL/dL and its largest error
2.5, so a measured content is met within 2.6.
"""

import numpy as np
import pytest

from worksheet.oxygen.content import co2_content_blood, co2_content_plasma

PLASMA = [  # PCO2 [mmHg], pH, plasma content [mL/dL]
    (27.3, 7.433, 43.03),
    (28.6, 7.510, 53.84),
    (29.8, 7.500, 54.82),
    (31.4, 7.493, 56.84),
    (33.8, 7.469, 57.88),
    (38.6, 7.421, 59.19),
    (42.1, 7.351, 55.01),
    (49.6, 7.308, 58.78),
]
MEASURED = [  # PCO2 [mmHg], pH, haemoglobin [g/dL], saturation, blood content measured [mL/dL]
    (26.4, 7.411, 19.0, 0.840, 30.4),
    (27.3, 7.433, 18.4, 0.853, 34.0),
    (28.6, 7.510, 16.5, 0.930, 40.3),
    (29.8, 7.500, 16.1, 0.979, 40.6),
    (33.7, 7.394, 17.1, 0.899, 35.6),
    (33.8, 7.469, 16.1, 0.806, 43.1),
    (38.6, 7.421, 18.0, 0.494, 46.2),
    (42.1, 7.351, 18.4, 0.389, 45.2),
    (43.0, 7.321, 19.0, 0.335, 43.5),
    (49.6, 7.308, 17.1, 0.395, 46.8),
]


@pytest.mark.parametrize(("pco2", "ph", "content"), PLASMA)
def test_plasma_content_as_printed(pco2, ph, content):
    assert co2_content_plasma(pco2, ph) == pytest.approx(content, abs=0.006)


@pytest.mark.parametrize(("pco2", "ph", "hb", "so2", "content"), MEASURED)
def test_blood_content_as_measured(pco2, ph, hb, so2, content):
    assert co2_content_blood(pco2, ph, hb, so2) == pytest.approx(content, abs=2.6)


def test_spread_of_the_measured_samples_is_the_published_one():
    pco2, ph, hb, so2, content = np.array(MEASURED).T
    error = co2_content_blood(pco2, ph, hb, so2) - content
    assert np.std(error, ddof=1) < 1.6  # published 1.15 on 38 samples: upper 95 % limit for an SD of 10 samples


def test_equation_holds_below_ph_8_142_only():
    assert np.isnan(co2_content_blood(40.0, 8.142, 15.0, 0.97))
    assert np.isfinite(co2_content_blood(40.0, 7.8, 15.0, 0.97))
