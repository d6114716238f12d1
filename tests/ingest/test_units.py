import numpy as np
import pytest

from rhovane.ingest.units import conversion, ug_m3_per_ppb

# The rule that monitoring handbooks print, µg/m³ = ppb x 12.187 x M / (273.15 + °C), with the molar masses printed
# beside it (as on vista.is, "ppb yfir í míkrógrömm").
PRINTED_MOLAR_MASS = {"NO2": 46.01, "O3": 48.00, "NO": 30.01, "SO2": 64.06, "CO": 28.01}


@pytest.mark.parametrize("gas", PRINTED_MOLAR_MASS)
def test_gas_factors_agree_with_the_printed_rule(gas):
    assert ug_m3_per_ppb(gas) == pytest.approx(12.187 * PRINTED_MOLAR_MASS[gas] / 293.15, rel=2e-4)


@pytest.mark.parametrize(
    ("found", "wanted", "quantity", "value", "expected"),
    [
        ("ppb", "ug/m3", "NO2", 10.0, 10 * 46.005 / 24.0552),
        ("ug/m3", "ppb", "O3", 100.0, 100 / (47.997 / 24.0552)),
        ("ppm", "mg/m3", "CO", 2.0, 2 * 28.010 / 24.0552),
        ("ppm", "ug/m3", "so2", 0.5, 500 * 64.058 / 24.0552),
        ("mg/m3", "ug/m3", "PM10", 0.05, 50.0),
        ("µg/m³", "mg/m3", "CO", 1200.0, 1.2),
        ("degC", "K", "temperature", 20.0, 293.15),
        ("K", "degC", "temperature", 273.15, 0.0),
        ("degF", "degC", "temperature", 212.0, 100.0),
        ("°C", "degF", "temperature", -40.0, -40.0),
        ("K", "degF", "temperature", 255.3722222, 0.0),
        ("km/h", "m/s", "wind speed", 36.0, 10.0),
        ("knots", "m/s", "wind speed", 1.0, 0.514444),
        ("m/s", "knots", "wind speed", 0.514444, 1.0),
        ("kt", "km/h", "wind speed", 10.0, 18.52),
        ("in", "mm", "rain", 1.0, 25.4),
        ("mm", "cm", "rain", 5.0, 0.5),
    ],
)
def test_known_conversions(found, wanted, quantity, value, expected):
    known = conversion(found, wanted, quantity)
    assert value * known.factor + known.offset == pytest.approx(expected, rel=1e-5, abs=1e-5)


def test_a_conversion_and_its_inverse_give_the_value_back():
    rng = np.random.default_rng(11)
    for one, other, quantity in [
        ("ppb", "mg/m3", "NO"),
        ("degF", "K", "t"),
        ("km/h", "knots", "w"),
        ("in", "cm", "r"),
    ]:
        there, back = conversion(one, other, quantity), conversion(other, one, quantity)
        value = rng.uniform(-50, 50, 20)
        np.testing.assert_allclose(
            (value * there.factor + there.offset) * back.factor + back.offset, value, atol=1e-9
        )


@pytest.mark.parametrize("spelling", ["µg/m³", "μg/m3", "ug/m³", "ug m-3", "ug/m3"])
def test_spellings_of_one_unit_change_nothing(spelling):
    assert conversion(spelling, "ug/m3", "PM2.5").changes_nothing


def test_equal_units_that_nobody_knows_change_nothing():
    assert conversion("vehicles/h", "vehicles/h", "traffic").changes_nothing


@pytest.mark.parametrize(
    ("found", "wanted", "quantity"),
    [
        ("ppb", "ug/m3", "PM10"),  # no gas
        ("ppb", "ug/m3", "benzene"),  # a gas without a factor here
        ("ppb", "degC", "NO2"),
        ("mm", "m/s", "rain"),
        ("vehicles", "1/h", "traffic"),
        ("UG/M3", "ug/m3", "NO2"),  # unit symbols keep their case
    ],
)
def test_what_has_no_published_conversion_is_not_guessed(found, wanted, quantity):
    assert conversion(found, wanted, quantity) is None
