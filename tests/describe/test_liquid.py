"""Water against IAPWS-95 of the independent package ``iapws``, saline against published numbers."""

import re

import pytest
from iapws import IAPWS95
from iapws._iapws import _Viscosity
from iapws.iapws97 import _PSat_T, _Region1

from sonoyield.describe import liquid
from sonoyield.describe.liquid import liquid_state, saline, water

# 0.01 degC is the triple point, where the reference begins; the product begins at 0 degC.
TEMPERATURES = [273.16, *(273.15 + t for t in range(1, 81))]


# First the reference itself, against the check values printed in the releases.
@pytest.mark.parametrize(
    ("row", "found", "value", "tolerance"),
    [
        # IAPWS R7-97(2012), table 35, saturation pressure in MPa
        ("WAT-01", _PSat_T(300.0), 3536.58941e-6, 1e-4),
        ("WAT-04", _PSat_T(500.0), 2.63889776, 1e-4),
        ("WAT-04", _PSat_T(600.0), 12.3443146, 1e-4),
        # IAPWS R12-08, table 4, viscosity in Pa s
        ("WAT-02", _Viscosity(998.0, 298.15), 889.735100e-6, 1e-4),
        ("WAT-05", _Viscosity(1000.0, 373.15), 307.883622e-6, 1e-4),
        ("WAT-05", _Viscosity(1200.0, 298.15), 1437.649467e-6, 1e-4),
        # IAPWS R7-97(2012), table 5, sound speed in m/s
        ("WAT-03", _Region1(300.0, 3.0)["w"], 1507.73921, 1e-5),
    ],
)
def test_reference_package_gives_the_release_values(
    row: str, found: float, value: float, tolerance: float
) -> None:
    assert found == pytest.approx(value, rel=tolerance), row


@pytest.mark.parametrize("temperature", TEMPERATURES)
def test_water_against_iapws95(temperature: float) -> None:
    ours = water(temperature)
    one_atm = IAPWS95(T=temperature, P=0.101325)
    boiling = IAPWS95(T=temperature, x=0)
    dew = IAPWS95(T=temperature, x=1)
    # 0.1 % for density, sound speed and vapour pressure, 0.5 % for the other two: the tolerances
    # of the rows WAT-T*; the latent heat has no row, 0.1 % is taken.
    assert ours.density == pytest.approx(one_atm.rho, rel=1e-3)
    assert ours.sound_speed == pytest.approx(one_atm.w, rel=1e-3)
    assert ours.saturation_pressure == pytest.approx(boiling.P * 1e6, rel=1e-3)
    assert ours.viscosity == pytest.approx(one_atm.mu, rel=5e-3)
    assert ours.surface_tension == pytest.approx(boiling.sigma, rel=5e-3)
    assert ours.latent_heat == pytest.approx((dew.h - boiling.h) * 1e3, rel=1e-3)
    # No rows either: 0.1 % and 0.05 % are taken.
    assert ours.thermal_conductivity == pytest.approx(one_atm.k, rel=1e-3)
    assert ours.heat_capacity == pytest.approx(one_atm.cp * 1e3, rel=5e-4)


# IAPWS R7-97, R1-76(2014), R6-95 and R12-08 at 101325 Pa, computed with the iapws package.
@pytest.mark.parametrize(
    ("row", "celsius", "vapour", "tension", "density", "viscosity", "speed"),
    [
        ("WAT-T0p01", 0.01, 611.657, 0.0756463, 999.8438, 0.00179113, 1402.43),
        ("WAT-T10", 10.0, 1228.18, 0.074221, 999.7025, 0.0013059, 1447.27),
        ("WAT-T20", 20.0, 2339.22, 0.0727361, 998.2072, 0.0010016, 1482.35),
        ("WAT-T25", 25.0, 3169.75, 0.0719722, 997.0476, 0.000890023, 1496.7),
        ("WAT-T50", 50.0, 12351.3, 0.0679439, 988.035, 0.000546516, 1542.58),
        ("WAT-T60", 60.0, 19945.8, 0.0662383, 983.1958, 0.000466035, 1550.97),
    ],
)
def test_water_table(
    row: str,
    celsius: float,
    vapour: float,
    tension: float,
    density: float,
    viscosity: float,
    speed: float,
) -> None:
    ours = water(273.15 + celsius)
    assert ours.saturation_pressure == pytest.approx(vapour, rel=1e-3), row
    assert ours.density == pytest.approx(density, rel=1e-3), row
    assert ours.sound_speed == pytest.approx(speed, rel=1e-3), row
    assert ours.surface_tension == pytest.approx(tension, rel=5e-3), row
    assert ours.viscosity == pytest.approx(viscosity, rel=5e-3), row


# 0.9 % NaCl. Density: volumetric data of NaCl solutions (Pitzer type), memory (high). Sound speed:
# Chen, Chen and Millero (1978), J. Acoust. Soc. Am. 63, 1795, memory (medium), with the bounds
# given there. Viscosity: Jones-Dole, memory (high). Surface tension: 1.64 mN/m per mol/kg, memory
# (high). Vapour pressure: water activity 0.9949, memory (high). The same sources feed the product,
# so this guards the scaling, not the sources. Tolerance: the last digit printed.
@pytest.mark.parametrize(
    ("kelvin", "density", "slow", "fast", "viscosity", "tension", "vapour"),
    [
        (298.15, 1003.4, 1504.7, 1508.7, 0.903e-3, 72.22e-3, 3153.7),
        (310.15, 999.6, 1531.66, 1535.66, 0.701e-3, 70.33e-3, 6250.3),
    ],
)
def test_saline_table(
    kelvin: float,
    density: float,
    slow: float,
    fast: float,
    viscosity: float,
    tension: float,
    vapour: float,
) -> None:
    ours = saline(kelvin, 9.0)
    assert ours.density == pytest.approx(density, abs=0.1)
    assert slow <= ours.sound_speed <= fast
    assert ours.viscosity == pytest.approx(viscosity, abs=1e-6)
    assert ours.surface_tension == pytest.approx(tension, abs=1e-5)
    assert ours.saturation_pressure == pytest.approx(vapour, rel=1.5e-4)


def test_saline_without_salt_is_water() -> None:
    assert saline(298.15, 0.0) == water(298.15) == liquid_state("saline", 298.15, 0.0)


def test_salt_moves_each_property_the_right_way() -> None:
    # Salt makes water denser, stiffer, thicker, tenser and less volatile (common practice).
    for kelvin in (273.15, 298.15, 353.15):
        fresh, little, much = water(kelvin), saline(kelvin, 9.0), saline(kelvin, 60.0)
        for name in ("density", "sound_speed", "viscosity", "surface_tension"):
            assert getattr(fresh, name) < getattr(little, name) < getattr(much, name)
        assert fresh.saturation_pressure > little.saturation_pressure > much.saturation_pressure


@pytest.mark.parametrize("kelvin", [273.14, 353.16, float("nan"), -1.0])
@pytest.mark.parametrize(
    "law",
    [
        liquid.density_kell1975,
        liquid.sound_speed_marczak1997,
        liquid.viscosity_iapws2011,
        liquid.surface_tension_iapws2014,
        liquid.saturation_pressure_wagner_pruss,
        liquid.latent_heat,
        liquid.thermal_conductivity_iapws2008,
        liquid.heat_capacity,
        water,
    ],
)
def test_outside_the_range(law: object, kelvin: float) -> None:
    with pytest.raises(ValueError, match=re.escape("273.15 to 353.15 K (0 to 80 degC)")):
        law(kelvin)  # type: ignore[operator]


@pytest.mark.parametrize("salinity", [-0.1, 60.1, float("nan")])
def test_salinity_outside_the_range(salinity: float) -> None:
    with pytest.raises(ValueError, match="0 to 60 kg/m3"):
        saline(298.15, salinity)


def test_unknown_kind() -> None:
    with pytest.raises(ValueError, match="allowed water, saline"):
        liquid_state("oil", 298.15)
