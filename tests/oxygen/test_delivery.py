"""Delivery, consumption, extraction, body surface, CO2 gap: numbers worked by hand, and the edges of each domain."""

import dataclasses

import numpy as np
import pytest

from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.delivery import (
    body_surface,
    bsa_dubois,
    bsa_mosteller,
    co2_gap,
    co2_o2_ratio,
    extraction_ratio,
    oxygen_consumption,
    oxygen_delivery,
)

BELOW = -1e-9


@pytest.mark.parametrize(
    ("function", "given", "by_hand"),
    [
        (oxygen_delivery, (5.0, 20.0), 1000.0),
        (oxygen_delivery, (0.0, 20.0), 0.0),
        (oxygen_consumption, (5.0, 20.0, 15.0), 250.0),
        (oxygen_consumption, (5.0, 15.0, 15.0), 0.0),
        (extraction_ratio, (20.0, 15.0), 0.25),
        (extraction_ratio, (20.0, 20.0), 0.0),
        (extraction_ratio, (0.5, 0.0), 1.0),
        (bsa_mosteller, (180.0, 80.0), 2.0),
        (bsa_dubois, (180.0, 80.0), 1.99642),
        (co2_gap, (46.0, 40.0), 6.0),
        (co2_gap, (38.0, 40.0), -2.0),
        (co2_o2_ratio, (7.0, 20.0, 15.0), 1.4),
        (co2_o2_ratio, (0.35, 1.0, 0.75), 1.4),
    ],
)
def test_worked_by_hand(function, given, by_hand):
    assert function(*given) == pytest.approx(by_hand, rel=1e-5)


@pytest.mark.parametrize(
    ("function", "inside", "outside"),
    [
        (oxygen_delivery, (0.0, 20.0), (BELOW, 20.0)),
        (oxygen_delivery, (5.0, 0.0), (5.0, BELOW)),
        (oxygen_delivery, (0.5, 0.5), (-0.5, -0.5)),
        (oxygen_consumption, (0.0, 20.0, 15.0), (BELOW, 20.0, 15.0)),
        (oxygen_consumption, (5.0, 20.0, 0.0), (5.0, 20.0, BELOW)),
        (oxygen_consumption, (5.0, 15.0, 15.0), (5.0, 15.0, 15.0 + 1e-9)),
        (extraction_ratio, (1e-9, 0.0), (0.0, 0.0)),
        (extraction_ratio, (0.5, 0.25), (-0.5, -0.6)),
        (extraction_ratio, (20.0, 0.0), (20.0, BELOW)),
        (extraction_ratio, (15.0, 15.0), (15.0, 15.0 + 1e-9)),
        (bsa_mosteller, (1e-9, 80.0), (0.0, 80.0)),
        (bsa_mosteller, (180.0, 1e-9), (180.0, 0.0)),
        (bsa_mosteller, (0.5, 0.5), (-0.5, -0.5)),
        (bsa_dubois, (1e-9, 80.0), (0.0, 80.0)),
        (bsa_dubois, (180.0, 1e-9), (180.0, 0.0)),
        (co2_gap, (0.0, 40.0), (BELOW, 40.0)),
        (co2_gap, (40.0, 0.0), (40.0, BELOW)),
        (co2_gap, (0.5, 0.5), (-0.5, -0.5)),
        (co2_o2_ratio, (5.0, 20.0, 0.0), (5.0, 20.0, BELOW)),
        (co2_o2_ratio, (5.0, 20.0, 20.0 - 1e-9), (5.0, 20.0, 20.0)),
    ],
)
def test_edges_of_the_domain(function, inside, outside):
    assert np.isfinite(function(*inside))
    assert np.isnan(function(*outside))


def test_dubois_with_a_dimension_of_one_is_defined():
    assert np.isfinite(bsa_dubois(0.5, 0.5))


def test_body_surface_follows_the_site():
    dubois = dataclasses.replace(DEFAULT, bsa_formula="dubois")
    assert body_surface(170.0, 100.0, DEFAULT) == bsa_mosteller(170.0, 100.0)
    assert body_surface(170.0, 100.0, dubois) == bsa_dubois(170.0, 100.0)
    assert body_surface(170.0, 100.0, DEFAULT) != body_surface(170.0, 100.0, dubois)


def test_ratio_of_contents_uses_the_same_function():
    assert co2_o2_ratio(4.0, 20.0, 15.0) == pytest.approx(0.8)
