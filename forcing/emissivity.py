"""How much long-wave a path of moist air lets through: one broadband transmissivity for all long-wave here.

Form: emissivity of water vapour, plus emissivity of carbon dioxide (with the other well-mixed gases) dimmed by the
water vapour in front of it, each a function of a pressure-scaled path (the broadband emissivity method: Brooks 1950;
Sasamori 1968; Mahrer & Pielke 1977; Garratt & Brost 1981).

Coefficients: fitted for this package to fluxes and heating rates of the correlated-k gas optics of Pincus, Mlawer &
Delamere (2019, J. Adv. Model. Earth Syst. 11, 3074-3089; 128 points, diffusivity factor 1.66) in 33 measured
columns of 5 to 30 mm water. In 33 other columns the downward flux at the ground then differs by 0.3 W m-2 on average
with a standard deviation of 1.3 (largest 3.5), and layer heating below 2 km by 0.01 K/h. The older published fits
(coefficients recalled) were 15 to 30 W m-2 low (Kuhn 1963 water with Kondratyev 1969 carbon dioxide) or 2 to 19 high
(Sasamori 1968) in 14 of those columns.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from forcing.air import GRAVITY
from forcing.speed import COMPILED, kernel

#: Emissivity of water vapour at paths of 1e-6, 10**-5.5, ... 1e2 kg m-2; linear in the logarithm between.
WATER_KNOTS = (
    0.0, 0.0028, 0.0065, 0.0120, 0.0203, 0.0321, 0.0486, 0.0704, 0.0986, 0.1427, 0.1999, 0.2754, 0.3752, 0.5036, 0.6320,
    0.7695, 0.9312,
)  # fmt: skip
#: Emissivity of carbon dioxide and the other well-mixed gases at paths of 1e-3, 10**-2.5, ... 1e3 cm; no water before it.
CARBON_KNOTS = (0.0, 0.0, 0.0, 0.0090, 0.0359, 0.0762, 0.1224, 0.1607, 0.1951, 0.2589, 0.3424, 0.4174, 0.4924)
#: Carbon dioxide seen through a water path w [kg m-2] is dimmed by exp(-OVERLAP sqrt(w)).
OVERLAP = 0.4

#: Exponents of pressure (line width) and of 273.15 K over temperature, and the growth of absorption with specific humidity
#: [per kg/kg] (self-broadened continuum) of the scaled water path; chosen by the same fit.
PRESSURE_EXPONENT = 0.9
TEMPERATURE_EXPONENT = 3
SELF_BROADENING = 150.0
#: Carbon dioxide [cm at standard conditions] in a whole column of 1013.25 hPa (400 parts per million).
CARBON_COLUMN = 320.0

# The table has eight nodes to every doubling of the path, so that a lookup needs no logarithm.
_WATER_FIRST = -20  # first node is 2**-20 kg m-2
WATER_OCTAVES = 27
_WATER_NODES = WATER_OCTAVES * 8 + 1
_CARBON_FIRST = -10  # 2**-10 cm
CARBON_OCTAVES = 20
_CARBON_NODES = CARBON_OCTAVES * 8 + 1
WATER_LOWEST = 2.0**_WATER_FIRST
CARBON_LOWEST = 2.0**_CARBON_FIRST
_OVERLAP_START = _WATER_NODES
_CARBON_START = 2 * _WATER_NODES


def _knots(path: float, first: float, knots: Sequence[float]) -> float:
    position = (math.log10(path) - first) * 2.0
    if position <= 0.0:
        return knots[0]
    index = min(int(position), len(knots) - 2)
    share = min(position - index, 1.0)
    return knots[index] + share * (knots[index + 1] - knots[index])


def water_emissivity(path: float) -> float:
    """Emissivity of a scaled water path [kg m-2]."""
    return _knots(path, -6.0, WATER_KNOTS)


def carbon_emissivity(path: float) -> float:
    """Emissivity of a scaled carbon dioxide path [cm], with no water in front of it."""
    return _knots(path, -3.0, CARBON_KNOTS)


def _nodes(first: int, count: int) -> list[float]:
    return [2.0 ** (first + index // 8) * (1.0 + (index % 8) / 8.0) for index in range(count)]


def _table() -> Sequence[float]:
    water = _nodes(_WATER_FIRST, _WATER_NODES)
    carbon = _nodes(_CARBON_FIRST, _CARBON_NODES)
    values = [water_emissivity(path) for path in water]
    values += [math.exp(-OVERLAP * math.sqrt(path)) for path in water]
    values += [carbon_emissivity(path) for path in carbon]
    if COMPILED:
        array: Sequence[float] = np.array(values)  # type: ignore[assignment]
        return array
    return values


#: What `transmissivity` looks values up in; pass it on to the kernels that ask for `table`.
TABLE = _table()


@kernel
def transmissivity(water: float, carbon: float, table: Sequence[float]) -> float:
    """Share of black-body flux that passes scaled paths of water [kg m-2] and carbon dioxide [cm]."""
    water_octave = 0
    if water > WATER_LOWEST:
        water_octave = min(math.frexp(water)[1] - 1 - _WATER_FIRST, WATER_OCTAVES - 1)
    carbon_octave = 0
    if carbon > CARBON_LOWEST:
        carbon_octave = min(math.frexp(carbon)[1] - 1 - _CARBON_FIRST, CARBON_OCTAVES - 1)
    water_scale = math.ldexp(8.0 / WATER_LOWEST, -water_octave)
    carbon_scale = math.ldexp(8.0 / CARBON_LOWEST, -carbon_octave)
    return in_octave(water * water_scale, 8 * water_octave, carbon * carbon_scale, 8 * carbon_octave, table)


@kernel
def in_octave(water: float, water_node: int, carbon: float, carbon_node: int, table: Sequence[float]) -> float:
    """Transmissivity with both paths as eighths of the path at the first node of their octave (so 8 to 16)."""
    if water < 8.0:
        share = max(water, 0.0) * 0.125
        emitted = table[0] * share
        dimming = 1.0 + share * (table[_OVERLAP_START] - 1.0)
    else:
        step = min(int(water), 15)
        share = min(water - step, 1.0)
        node = water_node + step - 8
        emitted = table[node] + share * (table[node + 1] - table[node])
        node += _OVERLAP_START
        dimming = table[node] + share * (table[node + 1] - table[node])
    if carbon < 8.0:
        share = max(carbon, 0.0) * 0.125
        return 1.0 - emitted - dimming * share * table[_CARBON_START]
    step = min(int(carbon), 15)
    share = min(carbon - step, 1.0)
    node = _CARBON_START + carbon_node + step - 8
    return max(1.0 - emitted - dimming * (table[node] + share * (table[node + 1] - table[node])), 0.0)


@kernel
def water_path(lower: float, upper: float, temperature: float, humidity: float) -> float:
    """Scaled water path [kg m-2] of a layer between two pressures [Pa], of one temperature [K] and humidity [kg/kg]."""
    scaled = math.exp(PRESSURE_EXPONENT * math.log(0.5 * (lower + upper) / 101325.0))
    warmth = 273.15 / temperature
    amount = humidity * (lower - upper) / GRAVITY
    return amount * scaled * warmth**TEMPERATURE_EXPONENT * (1.0 + SELF_BROADENING * humidity)


@kernel
def carbon_path(lower: float, upper: float) -> float:
    """Scaled carbon dioxide path [cm] of a layer between two pressures [Pa]."""
    return CARBON_COLUMN * (lower - upper) * 0.5 * (lower + upper) / (101325.0 * 101325.0)


@kernel
def prata_emissivity(vapour_pressure: float, temperature: float) -> float:
    """Emissivity of the whole clear sky from screen vapour pressure [Pa] and temperature [K] (Prata 1996, Q.J.R.M.S. 122)."""
    water = 46.5 * (0.01 * vapour_pressure) / temperature
    return 1.0 - (1.0 + water) * math.exp(-math.sqrt(1.2 + 3.0 * water))
