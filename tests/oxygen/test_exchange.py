"""Gas exchange, altitude and bands: numbers worked by hand, and the edges of each domain."""

import dataclasses

import numpy as np
import pytest

from worksheet.oxygen import exchange
from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.content import functional_to_fractional, oxygen_content
from worksheet.oxygen.curve import saturation_severinghaus_kelman, saturation_tanh
from worksheet.oxygen.exchange import (
    BAND_WORDS,
    Band,
    a_a_ratio,
    aa_gradient,
    alveolar_po2,
    alveolar_po2_short,
    barometric_pressure_icao,
    barometric_pressure_west,
    end_capillary_content,
    estimated_fio2_low_flow,
    expected_aa_gradient,
    oxygenation_index,
    pf_altitude_corrected,
    pf_band,
    pf_band_global,
    pf_ratio,
    rice_sf,
    rox_index,
    sf_ratio,
    shunt_fraction,
    water_vapour_pressure,
)
from worksheet.oxygen.readings import Device

BELOW, ABOVE = -1e-9, 1.0 + 1e-9


@pytest.mark.parametrize(
    ("function", "given", "by_hand"),
    [
        (alveolar_po2, (0.21, 40.0, 760.0, DEFAULT), 149.73 - 47.9),
        (alveolar_po2, (1.0, 40.0, 760.0, DEFAULT), 673.0),
        (alveolar_po2_short, (0.21, 40.0, 760.0, DEFAULT), 99.73),
        (alveolar_po2_short, (1.0, 40.0, 760.0, DEFAULT), 663.0),
        (aa_gradient, (100.0, 90.0), 10.0),
        (aa_gradient, (90.0, 100.0), -10.0),
        (expected_aa_gradient, (50.0,), 13.0),
        (a_a_ratio, (75.0, 100.0), 0.75),
        (pf_ratio, (80.0, 0.4), 200.0),
        (pf_ratio, (80.0, 1.0), 80.0),
        (sf_ratio, (0.92, 0.4), 230.0),
        (rice_sf, (100.0,), 148.0),
        (shunt_fraction, (20.0, 19.0, 15.0), 0.2),
        (shunt_fraction, (20.0, 20.0, 15.0), 0.0),
        (shunt_fraction, (20.0, 20.1, 15.0), 0.0),
        (shunt_fraction, (20.0, 15.0, 15.0), 1.0),
        (shunt_fraction, (1.0, 0.9, 0.5), 0.2),
        (oxygenation_index, (0.5, 16.0, 80.0), 10.0),
        (oxygenation_index, (1.0, 0.8, 0.8), 100.0),
        (rox_index, (0.90, 0.5, 30.0), 6.0),
        (rox_index, (1.0, 1.0, 0.5), 200.0),
        (estimated_fio2_low_flow, (3.0,), 0.32),
        (estimated_fio2_low_flow, (6.0,), 0.44),
        (estimated_fio2_low_flow, (0.0,), 0.21),
        (pf_altitude_corrected, (190.0, 600.0), 150.0),
        (pf_altitude_corrected, (190.0, 760.0), 190.0),
        (barometric_pressure_west, (2000.0,), np.exp(6.63268 - 0.2224 - 0.00596)),
        (barometric_pressure_icao, (1000.0,), 674.12),
        # Buck's equation worked apart: (18.678 - 37/234.5) 37/294.14 = 2.329666, 62.7988 hPa
        (water_vapour_pressure, (37.0,), 47.10301),
        (water_vapour_pressure, (90.0,), 526.1843),
    ],
)
def test_worked_by_hand(function, given, by_hand):
    assert function(*given) == pytest.approx(by_hand, rel=1e-5)


@pytest.mark.parametrize("alveolar", [alveolar_po2, alveolar_po2_short])
def test_alveolar_equation_follows_the_site(alveolar):
    base = alveolar(0.3, 40.0, 700.0, DEFAULT)
    assert alveolar(0.3, 40.0, 700.0, dataclasses.replace(DEFAULT, water_vapour=57.0)) == pytest.approx(base - 3.0)
    assert alveolar(0.3, 40.0, 700.0, dataclasses.replace(DEFAULT, respiratory_quotient=1.0)) > base


@pytest.mark.parametrize(
    ("function", "inside", "outside"),
    [
        (alveolar_po2, (1.0, 40.0, 760.0, DEFAULT), (ABOVE, 40.0, 760.0, DEFAULT)),
        (alveolar_po2, (0.21, 0.0, 760.0, DEFAULT), (0.21, BELOW, 760.0, DEFAULT)),
        (alveolar_po2, (1e-9, 0.0, 760.0, DEFAULT), (0.0, 0.0, 760.0, DEFAULT)),
        (alveolar_po2, (0.21, 0.0, 47.1, DEFAULT), (0.21, 0.0, 47.0, DEFAULT)),
        (alveolar_po2, (0.21, 120.0, 760.0, DEFAULT), (0.21, 126.0, 760.0, DEFAULT)),
        (alveolar_po2, (0.21, 0.0, 47.5, DEFAULT), (-0.21, 0.0, 46.0, DEFAULT)),
        (alveolar_po2_short, (1.0, 40.0, 760.0, DEFAULT), (ABOVE, 40.0, 760.0, DEFAULT)),
        (alveolar_po2_short, (0.21, 0.0, 760.0, DEFAULT), (0.21, BELOW, 760.0, DEFAULT)),
        (alveolar_po2_short, (1e-9, 0.0, 760.0, DEFAULT), (0.0, 0.0, 760.0, DEFAULT)),
        (alveolar_po2_short, (0.21, 0.0, 47.1, DEFAULT), (0.21, 0.0, 47.0, DEFAULT)),
        (alveolar_po2_short, (0.21, 119.0, 760.0, DEFAULT), (0.21, 120.0, 760.0, DEFAULT)),
        (alveolar_po2_short, (0.21, 0.0, 47.5, DEFAULT), (-0.21, 0.0, 46.0, DEFAULT)),
        (alveolar_po2, (1.0, 719.0, 767.0, DEFAULT), (1.0, 720.0, 767.0, DEFAULT)),
        (alveolar_po2_short, (1.0, 575.0, 767.0, DEFAULT), (1.0, 576.0, 767.0, DEFAULT)),
        (aa_gradient, (0.0, 90.0), (BELOW, 90.0)),
        (aa_gradient, (90.0, 0.0), (90.0, BELOW)),
        (aa_gradient, (0.5, 0.5), (-0.5, -0.5)),
        (expected_aa_gradient, (0.0,), (BELOW,)),
        (expected_aa_gradient, (0.5,), (-0.5,)),
        (a_a_ratio, (0.0, 100.0), (BELOW, 100.0)),
        (a_a_ratio, (50.0, 1e-9), (50.0, 0.0)),
        (a_a_ratio, (50.0, 0.5), (50.0, -0.5)),
        (pf_ratio, (0.0, 0.5), (BELOW, 0.5)),
        (pf_ratio, (80.0, 1e-9), (80.0, 0.0)),
        (pf_ratio, (80.0, 1.0), (80.0, ABOVE)),
        (sf_ratio, (0.0, 0.5), (BELOW, 0.5)),
        (sf_ratio, (0.97, 0.5), (0.9701, 0.5)),
        (sf_ratio, (0.9, 1e-9), (0.9, 0.0)),
        (sf_ratio, (0.9, 1.0), (0.9, ABOVE)),
        (rice_sf, (0.0,), (BELOW,)),
        (rice_sf, (0.5,), (-0.5,)),
        (shunt_fraction, (20.0, 19.0, 0.0), (20.0, 19.0, BELOW)),
        (shunt_fraction, (20.0, 25.0, 19.9), (20.0, 25.0, 20.0)),
        (shunt_fraction, (20.0, 15.0, 15.0), (20.0, 15.0 - 1e-9, 15.0)),
        (oxygenation_index, (1e-9, 15.0, 80.0), (0.0, 15.0, 80.0)),
        (oxygenation_index, (1.0, 15.0, 80.0), (ABOVE, 15.0, 80.0)),
        (oxygenation_index, (0.5, 0.0, 80.0), (0.5, BELOW, 80.0)),
        (oxygenation_index, (0.5, 15.0, 1e-9), (0.5, 15.0, 0.0)),
        (oxygenation_index, (0.5, 15.0, 0.5), (0.5, 15.0, -0.5)),
        (rox_index, (0.0, 0.5, 20.0), (BELOW, 0.5, 20.0)),
        (rox_index, (1.0, 0.5, 20.0), (ABOVE, 0.5, 20.0)),
        (rox_index, (0.9, 1e-9, 20.0), (0.9, 0.0, 20.0)),
        (rox_index, (0.9, 1.0, 20.0), (0.9, ABOVE, 20.0)),
        (rox_index, (0.9, 0.5, 1e-9), (0.9, 0.5, 0.0)),
        (rox_index, (0.9, 0.5, 0.5), (0.9, 0.5, -0.5)),
        (pf_altitude_corrected, (0.0, 700.0), (BELOW, 700.0)),
        (pf_altitude_corrected, (200.0, 1e-9), (200.0, 0.0)),
        (pf_altitude_corrected, (200.0, 0.5), (200.0, -0.5)),
        (barometric_pressure_west, (-500.0,), (-501.0,)),
        (barometric_pressure_west, (9000.0,), (9001.0,)),
        (barometric_pressure_icao, (-500.0,), (-501.0,)),
        (barometric_pressure_icao, (11000.0,), (11001.0,)),
        (water_vapour_pressure, (0.0,), (BELOW,)),
        (water_vapour_pressure, (100.0,), (100.1,)),
        (estimated_fio2_low_flow, (0.0,), (BELOW,)),
        (estimated_fio2_low_flow, (6.0,), (6.1,)),
    ],
)
def test_edges_of_the_domain(function, inside, outside):
    assert np.isfinite(function(*inside))
    assert np.isnan(function(*outside))


def test_altitude_correction_starts_at_1000_m():
    border = float(barometric_pressure_west(1000.0))
    assert pf_altitude_corrected(200.0, border) == 200.0
    assert pf_altitude_corrected(200.0, border - 0.01) == pytest.approx(200.0 * (border - 0.01) / 760.0)


def test_saturation_limit_is_the_site_of_the_catalogue():
    assert exchange.SPO2_LIMIT == 0.97
    # 97 % as a file gives it is 0.97 to rounding, not above it
    assert np.isfinite(sf_ratio(97 * 0.01, 0.5))


@pytest.mark.parametrize("name", ["tanh", "severinghaus"])
def test_end_capillary_content_uses_the_samples_own_haemoglobin(name):
    site = dataclasses.replace(DEFAULT, curve=name)
    if name == "tanh":
        so2 = saturation_tanh(110.0, 7.3, 50.0, cohb=0.1, methb=0.02)
    else:
        so2 = saturation_severinghaus_kelman(110.0, 7.3, 50.0)
    by_hand = oxygen_content(12.0, functional_to_fractional(so2, 0.13), 110.0, site)
    assert end_capillary_content(12.0, 0.13, 110.0, 7.3, 50.0, 0.1, 0.02, site) == by_hand


def test_estimated_fio2_is_never_below_air():
    assert estimated_fio2_low_flow(0.1) == 0.21
    assert estimated_fio2_low_flow(1.0) == pytest.approx(0.24)


def test_bands_as_an_array_with_their_words():
    assert pf_band([0.0, 0.5], 5.0).tolist() == [Band.SEVERE, Band.SEVERE]
    found = pf_band([350.0, 250.0, 150.0, 90.0, -1.0], 8.0)
    assert found.dtype == np.int8
    assert [BAND_WORDS[code] for code in found.tolist()] == [
        BAND_WORDS[band] for band in (Band.ABOVE, Band.MILD, Band.MODERATE, Band.SEVERE, Band.NOT_REPORTED)
    ]
    assert "200" in BAND_WORDS[Band.MILD]
    assert "300" in BAND_WORDS[Band.MILD]


def test_global_bands_as_an_array():
    devices = [Device.VENTILATOR, Device.HIGH_FLOW, Device.ROOM_AIR]
    found = pf_band_global([150.0, 150.0, 150.0], np.nan, np.nan, devices, 45.0)
    assert found.dtype == np.int8
    assert found.tolist() == [Band.MODERATE, Band.NOT_INTUBATED, Band.NOT_REPORTED]
    assert pf_band_global(np.nan, np.nan, 5.0, Device.VENTILATOR, 40.0) == Band.NOT_REPORTED
    steps = pf_band_global([300.5, 200.5, 100.5], np.nan, np.nan, Device.VENTILATOR, np.nan)
    assert steps.tolist() == [Band.ABOVE, Band.MILD, Band.MODERATE]
