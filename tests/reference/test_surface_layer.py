"""Published values of the surface layer and of the ground; the source stands beside each."""

from __future__ import annotations

import math

import pytest

from forcing.air import CP_DRY, KARMAN, density
from forcing.cover import cover, ground, table
from forcing.exchange import Ground
from forcing.similarity import momentum_span, phi_heat, phi_momentum, psi_heat, psi_momentum
from forcing.surface import energy_balance, energy_balance_net, imposed_fluxes, soil_layers

# zeta, phi_m, phi_h, psi_m, psi_h of Beljaars & Holtslag 1991 (J. Appl. Meteorol. 30, 327) with a = 1, b = 2/3, c = 5, d = 0.35
STABLE = [
    (0.01, 1.049837, 1.04987, -0.049918, -0.049935),
    (0.1, 1.483989, 1.487269, -0.491941, -0.49359),
    (0.2, 1.937213, 1.950129, -0.968188, -0.974713),
    (0.5, 3.129946, 3.207296, -2.3088, -2.3484),
    (1.0, 4.654325, 4.94532, -4.282286, -4.433944),
    (2.0, 6.509203, 7.564253, -7.456539, -8.020765),
    (5.0, 8.461798, 13.870128, -13.448066, -16.468619),
    (10.0, 11.50329, 29.192036, -19.437531, -29.66557),
]
# Paulson 1970 (J. Appl. Meteorol. 9, 857) with the 16 of Dyer 1974
UNSTABLE = [
    (-0.01, 0.963575, 0.928477, 0.038146, 0.075586),
    (-0.1, 0.787511, 0.620174, 0.283614, 0.534284),
    (-0.5, 0.57735, 0.333333, 0.793359, 1.386294),
    (-1.0, 0.492479, 0.242536, 1.116232, 1.881227),
    (-2.0, 0.417226, 0.174078, 1.494691, 2.431179),
    (-5.0, 0.333333, 0.111111, 2.068437, 3.218876),
]


@pytest.mark.parametrize(("zeta", "phi_m", "phi_h", "psi_m", "psi_h"), STABLE + UNSTABLE)
def test_similarity_functions(zeta, phi_m, phi_h, psi_m, psi_h):
    assert phi_momentum(zeta) == pytest.approx(phi_m, abs=2e-6)
    assert phi_heat(zeta) == pytest.approx(phi_h, abs=2e-6)
    assert psi_momentum(zeta) == pytest.approx(psi_m, abs=2e-6)
    assert psi_heat(zeta) == pytest.approx(psi_h, abs=2e-6)


@pytest.mark.parametrize("zeta", [-4.0, -0.3, 0.2, 3.0])
@pytest.mark.parametrize(("psi", "phi"), [(psi_momentum, phi_momentum), (psi_heat, phi_heat)])
def test_psi_is_the_integral_of_phi(zeta, psi, phi):
    """The psi of zeta is the integral of (1 - phi)/zeta from 0 (Paulson 1970, Eq. 4), here by the midpoint rule."""
    n = 4000
    total = math.fsum((1.0 - phi(zeta * (i + 0.5) / n)) / (i + 0.5) for i in range(n))
    assert psi(zeta) == pytest.approx(total, abs=1e-4)


def test_form_near_neutral_and_spread_of_published_sets():
    # Dyer 1974: 1 + 5 zeta for weak stability; at zeta = +1 published sets run from 4.56 (Grachev et al. 2007) to 7 (Foken 2008)
    assert phi_momentum(0.01) == pytest.approx(1.05, rel=1e-3)
    assert 4.5 < phi_momentum(1.0) < 7.0
    # (1 - 19.3 zeta)^(-1/4) = 0.4711 at -1: boundary-layer course MAQ-32306, chapter 14 (Hogstrom 1988)
    assert phi_momentum(-1.0) == pytest.approx(0.4711, rel=0.06)


def bare(**changes):
    one = ground(cover("short grass"), 0.5)
    return one._replace(**changes)


def test_neutral_log_law():
    # log law with k = 0.4: 5 m/s at 10 m over 0.03 m gives 0.3443 m/s
    found = imposed_fluxes(
        bare(roughness_momentum=0.03), 0.0, 0.0, 290.0, 0.005, 10.0, 5.0, 10.0, 1000.0, 1e5, math.nan, 0.0
    )
    assert found.friction_velocity == pytest.approx(0.3443, rel=1e-3)
    # MAQ-32306, exercise 1.6b: u* 0.5 m/s over 0.2 m gives 4.76 m/s at 9 m
    assert 0.5 / KARMAN * momentum_span(9.0, 0.2, 0.0) == pytest.approx(4.76, abs=0.01)


def test_shear_and_buoyancy_production():
    # MAQ-32306, exercise 3.2: u* 0.3 m/s at 2 and 10 m, flux 0.05 K m/s at 298 K
    for height, expected in ((2.0, 3.375e-2), (10.0, 6.75e-3)):
        shear = 0.3 / (KARMAN * height) * phi_momentum(0.0)
        assert 0.3**2 * shear == pytest.approx(expected, rel=0.005)
    heat = 0.05 * density(1e5, 298.0, 0.0) * CP_DRY
    found = imposed_fluxes(bare(), heat, 0.0, 298.0, 0.0, 10.0, 5.0, 10.0, 1000.0, 1e5, 0.3, 0.0)
    production = -found.inverse_obukhov * found.friction_velocity**3 / KARMAN
    assert production == pytest.approx(1.64e-3, rel=0.005)


# Davenport-Wieringa classes (WMO code register): a class counts as met inside its neighbours' limits
ROUGHNESS = [
    ("fresh snow", 0.0002, 0.005),
    ("paved ground", 0.0002, 0.005),
    ("dry bare soil", 0.001, 0.03),
    ("short grass", 0.02, 0.045),
    ("heath", 0.02, 0.045),
    ("green crop", 0.067, 0.15),
    ("grass with scattered trees", 0.167, 0.375),
    ("large low buildings", 0.33, 0.75),
    ("open low buildings", 0.5, 1.5),
    ("coniferous forest", 0.67, 2.0),
    ("compact high buildings", 2.0, 3.0),
]


@pytest.mark.parametrize(("name", "low", "high"), ROUGHNESS)
def test_roughness_classes(name, low, high):
    assert low <= cover(name).roughness_momentum <= high


# climate dynamics textbook Table 5.1, range +- 0.05, unless another source stands beside it
ALBEDO = [
    ("fresh snow", 0.70, 0.90),
    ("old snow", 0.45, 0.60),
    ("short grass", 0.10, 0.20),
    ("short grass", 0.20, 0.23),  # photovoltaics list 0.20, FAO-56 reference grass 0.23
    ("green crop", 0.15, 0.25),
    ("tropical forest", 0.08, 0.13),
    ("coniferous forest", 0.081, 0.16),  # Betts & Ball 1997; Table 5.1 boreal forest
    ("deciduous forest", 0.13, 0.16),  # Moore et al. 1996; Strugnell et al. 2001
    ("wet bare soil", 0.06, 0.13),
    ("dry bare soil", 0.22, 0.33),
    ("paved ground", 0.10, 0.40),  # asphalt to concrete
    ("compact mid-height buildings", 0.14, 0.14),  # Oke 1997: urban
    ("open low buildings", 0.15, 0.15),  # Oke 1997: suburban
]


@pytest.mark.parametrize(("name", "low", "high"), ALBEDO)
def test_albedo_is_in_the_published_range(name, low, high):
    assert low - 0.05 <= cover(name).albedo <= high + 0.05


# Table 5.1 of the same textbook; its 0.66 (wet soil), 0.82 and 0.89 (snow) are set aside, see the sources in the table of covers
EMISSIVITY = [
    ("short grass", 0.97, 0.99),
    ("green crop", 0.97, 0.99),
    ("coniferous forest", 0.96, 1.0),
    ("tropical forest", 0.95, 1.0),
    ("desert shrub", 0.95, 0.96),
    ("dry bare soil", 0.92, 0.98),
    ("wet bare soil", 0.92, 0.98),  # Oke 1997: rural
    ("compact low buildings", 0.94, 0.96),  # Oke 1997: urban
]


@pytest.mark.parametrize(("name", "low", "high"), EMISSIVITY)
def test_emissivity_is_in_the_published_range(name, low, high):
    assert low <= cover(name).emissivity <= high


# Stewart & Oke 2012, mean anthropogenic heat [W m-2]; thermal admittance by Oke 1997: suburban 800-1700, urban 1200-2100
BUILT = [
    ("compact high buildings", 50, 300, 1200, 2100),
    ("compact mid-height buildings", 0, 75, 1200, 2100),
    ("compact low buildings", 0, 75, 1200, 2100),
    ("open high buildings", 0, 50, 800, 1700),
    ("open low buildings", 0, 25, 800, 1700),
    ("large low buildings", 0, 50, 800, 1700),
    ("sparse buildings", 0, 10, 800, 1700),
    ("paved ground", 0, 0, 1026, 2265),  # SKAT 1993: loose gravel to solid concrete
]


@pytest.mark.parametrize(("name", "least", "most", "low", "high"), BUILT)
def test_built_covers(name, least, most, low, high):
    one = ground(cover(name), 0.5)
    assert least <= one.anthropogenic_heat <= most
    assert low <= math.sqrt(one.soil_conductivity * one.soil_heat_capacity) <= high


def test_rural_covers_release_no_heat_and_have_rural_admittance():
    for name in table():
        one = ground(cover(name), 0.5)
        if "buildings" in name or name == "paved ground" or one.snow:
            continue
        assert one.anthropogenic_heat == 0.0  # Stewart & Oke 2012, land cover types
        assert 600 <= math.sqrt(one.soil_conductivity * one.soil_heat_capacity) <= 2000, name  # Oke 1997, rural


def test_share_of_cover_in_compact_mid_height_buildings():
    one = cover(
        "compact mid-height buildings"
    )  # Stewart & Oke 2012: built 40-70 %, sealed 30-50 %, pervious below 20 %
    assert 0.40 <= one.built_fraction <= 0.70
    assert 0.30 <= one.impervious_fraction - one.built_fraction <= 0.50
    assert 1.0 - one.impervious_fraction < 0.20


def wet(temperature: float, relative: float, net: float = 500.0) -> float:
    """Bowen ratio of an open wet ground at noon."""
    from forcing.air import saturation_humidity

    one: Ground = bare(vegetation_fraction=0.0, bare_fraction=1.0, bare_resistance=0.0)
    humidity = relative * saturation_humidity(temperature, 1e5)
    found = energy_balance_net(
        one, 700.0, net, temperature, humidity, 10.0, 4.0, 10.0, 1000.0, 1e5, temperature, 80.0, 0.0, temperature, 0.0
    )
    return found.sensible / found.latent


def test_wet_surface_is_near_the_law_of_priestley_and_taylor():
    """Bowen ratio 0.443, 0.163, 0.013 at 10, 20, 30 C by 1.26 (Priestley & Taylor 1972); it holds for moderately moist air."""
    found = [wet(273.15 + t, 0.7) for t in (10.0, 20.0, 30.0)]
    for value, law in zip(found, (0.443, 0.163, 0.013), strict=True):
        assert value == pytest.approx(law, abs=0.12)
    assert found[0] > found[1] > found[2]
    # saturated air over a wet ground: the equilibrium gamma/slope. With FAO-56 at 10 C 0.693/1.26 of the energy evaporates,
    # a Bowen ratio of 0.82; little radiation keeps the skin near the air (the 100 kPa here instead of 101.3 give 0.01 less)
    assert wet(283.15, 1.0, net=30.0) == pytest.approx(0.82, abs=0.06)


def test_ground_heat_share_by_day():
    """G/Rn 0.1 over short grass (ASCE 2005, Eq. 65), up to 0.5 over bare ground (Clothier et al. 1986), half of it at night."""
    shares = {}
    for name in ("short grass", "dry bare soil"):
        one = ground(cover(name), 0.5)
        half = 2.0 * one.soil_conductivity / soil_layers(one)[0]
        found = energy_balance(
            one, 800.0, 340.0, 297.0, 0.009, 20.0, 3.0, 10.0, 1000.0, 97000.0, 297.0, half, 0.0, 297.0, 0.0
        )
        shares[name] = found.ground / found.net_radiation
    assert 0.05 < shares["short grass"] < 0.2
    assert shares["short grass"] < shares["dry bare soil"] < 0.65
