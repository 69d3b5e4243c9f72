"""Long-wave fluxes: downward at the ground for a column of levels, and both ways at every interface of a night column.

One scheme for both. With T the transmissivity between two heights and B = sigma T**4 at them, the downward flux at a
height is B there plus the sum of T dB along the air above, less T (B - F) at the column's top, where F comes in; the upward flux
mirrors it from the ground. Air of one temperature between black bodies of that temperature then exchanges exactly
nothing, and layer heating is the difference of net fluxes, so that energy is conserved to round-off.

Cloud is black: in its share of the sky it hides all air above its base. In a night column the interfaces at and above
the base are inside the cloud in that share and exchange nothing there.
"""

from __future__ import annotations

from collections.abc import MutableSequence, Sequence

from forcing.air import CP_DRY, GRAVITY, STEFAN_BOLTZMANN
from forcing.emissivity import (
    CARBON_LOWEST,
    CARBON_OCTAVES,
    WATER_LOWEST,
    WATER_OCTAVES,
    carbon_path,
    in_octave,
    prata_emissivity,
    transmissivity,
    water_path,
)
from forcing.speed import kernel

# The layer next to an interface: emissivity grows like path**0.3 there, so that the mean over the layer is the value at
# 0.4 of its path and not the half that two end points would give.
_ADJACENT = 0.4


@kernel
def _layer_mean(
    index: int, water: float, carbon: float, more_water: float, more_carbon: float, table: Sequence[float]
) -> float:
    """Mean transmissivity from the ground to a layer, by the paths below it and in it."""
    if index == 0:
        return transmissivity(_ADJACENT * more_water, _ADJACENT * more_carbon, table)
    near = transmissivity(water, carbon, table)
    return 0.5 * (near + transmissivity(water + more_water, carbon + more_carbon, table))


@kernel
def downwelling(
    pressure: Sequence[float],
    temperature: Sequence[float],
    humidity: Sequence[float],
    cloud_fraction: float,
    cloud_pressure: float,
    top_flux: float,
    offset: float,
    table: Sequence[float],
) -> float:
    """Downward long-wave at the ground [W m-2].

    Parameters
    ----------
    pressure, temperature, humidity : sequence of float, n levels upward from the ground
        Pa, K, kg/kg. Let them reach 100 hPa (`forcing.longwave_column.radiation_levels`), or give `top_flux`.
    cloud_fraction, cloud_pressure : float
        Share of the sky covered, and pressure at the cloud's base [Pa]; it emits as a black body at the temperature there.
    top_flux : float
        Downward flux at the last level [W m-2]; 0 for space.
    offset : float
        Added to the clear share [W m-2].
    table : sequence of float
        `forcing.emissivity.TABLE`.
    """
    water = carbon = 0.0
    low = STEFAN_BOLTZMANN * temperature[0] ** 4
    flux = low
    cloudy = low if cloud_pressure >= pressure[0] else -1.0
    for k in range(len(pressure) - 1):
        high = STEFAN_BOLTZMANN * temperature[k + 1] ** 4
        mean_temperature = 0.5 * (temperature[k] + temperature[k + 1])
        mean_humidity = 0.5 * (humidity[k] + humidity[k + 1])
        more_water = water_path(pressure[k], pressure[k + 1], mean_temperature, mean_humidity)
        more_carbon = carbon_path(pressure[k], pressure[k + 1])
        if cloudy < 0.0 and cloud_pressure >= pressure[k + 1]:
            # black from the base up: the change of B beyond it does not count
            share = (pressure[k] - cloud_pressure) / (pressure[k] - pressure[k + 1])
            part = _layer_mean(k, water, carbon, share * more_water, share * more_carbon, table)
            cloudy = flux + part * share * (high - low)
        flux += _layer_mean(k, water, carbon, more_water, more_carbon, table) * (high - low)
        water += more_water
        carbon += more_carbon
        low = high
    through = transmissivity(water, carbon, table)
    clear = flux - through * (low - top_flux) + offset
    if cloudy < 0.0:
        # the base is above the last level
        cloudy = flux
    return (1.0 - cloud_fraction) * clear + cloud_fraction * cloudy


@kernel
def formula_downwelling(
    vapour_pressure: float, temperature: float, cloud_fraction: float, cloud_temperature: float, offset: float
) -> float:
    """Downward long-wave at the ground [W m-2] from screen air alone, for a profile that ends too low.

    Clear sky by Prata (1996) plus `offset` [W m-2]; cloud is black at its base temperature [K] and seen through the
    share of the spectrum in which the clear air does not emit.
    """
    emissivity = prata_emissivity(vapour_pressure, temperature)
    clear = emissivity * STEFAN_BOLTZMANN * temperature**4 + offset
    return clear + cloud_fraction * (1.0 - emissivity) * STEFAN_BOLTZMANN * cloud_temperature**4


@kernel
def column_paths(
    pressure: Sequence[float],
    temperature: Sequence[float],
    humidity: Sequence[float],
    upper_water: Sequence[float],
    upper_carbon: Sequence[float],
    water: MutableSequence[float],
    carbon: MutableSequence[float],
) -> None:
    """Write the scaled paths from the ground to every interface into `water` [kg m-2] and `carbon` [cm].

    `pressure` [Pa] has n + 1 interfaces, `temperature` [K] and `humidity` [kg/kg] n cells; `upper_water` and
    `upper_carbon` are the paths from the column's top to m interfaces above it. The outputs have n + 1 + m.
    """
    cells = len(temperature)
    water[0] = 0.0
    carbon[0] = 0.0
    for k in range(cells):
        water[k + 1] = water[k] + water_path(pressure[k], pressure[k + 1], temperature[k], humidity[k])
        carbon[k + 1] = carbon[k] + carbon_path(pressure[k], pressure[k + 1])
    for k in range(len(upper_water)):
        water[cells + 1 + k] = water[cells] + upper_water[k]
        carbon[cells + 1 + k] = carbon[cells] + upper_carbon[k]


@kernel
def column_emission(
    pressure: Sequence[float],
    temperature: Sequence[float],
    upper_emission: Sequence[float],
    emission: MutableSequence[float],
) -> None:
    """Write the black-body flux at every interface into `emission` [W m-2], shape n + 1 + m.

    Cells are interpolated to the interfaces between them; the lowest and highest interface of the column have the
    temperature of their cell, so that the step to the skin stays where it is.
    """
    cells = len(temperature)
    low = STEFAN_BOLTZMANN * temperature[0] ** 4
    emission[0] = low
    for k in range(1, cells):
        high = STEFAN_BOLTZMANN * temperature[k] ** 4
        below = pressure[k - 1] - pressure[k]
        above = pressure[k] - pressure[k + 1]
        emission[k] = (low * above + high * below) / (below + above)
        low = high
    emission[cells] = low
    for k in range(len(upper_emission)):
        emission[cells + 1 + k] = upper_emission[k]


@kernel
def transmissivities(
    water: Sequence[float], carbon: Sequence[float], rows: int, table: Sequence[float], matrix: MutableSequence[float]
) -> None:
    """Write the transmissivity between interfaces i < rows and k > i into `matrix[i * m + k]`, m = len(water).

    The diagonal holds the mean transmissivity between interface i and the layer above it. The matrix depends on humidity
    and hardly on temperature, so that it can be kept while temperatures change (`fluxes` alone is far cheaper).
    """
    count = len(water)
    for i in range(rows):
        row = i * count
        water_scale = 8.0 / WATER_LOWEST
        carbon_scale = 8.0 / CARBON_LOWEST
        water_node = 0
        carbon_node = 0
        for k in range(i + 1, count):
            # paths only grow along a row, so that the octave of the table is followed instead of sought
            water_eighths = (water[k] - water[i]) * water_scale
            while water_eighths >= 16.0 and water_node < 8 * (WATER_OCTAVES - 1):
                water_eighths *= 0.5
                water_scale *= 0.5
                water_node += 8
            carbon_eighths = (carbon[k] - carbon[i]) * carbon_scale
            while carbon_eighths >= 16.0 and carbon_node < 8 * (CARBON_OCTAVES - 1):
                carbon_eighths *= 0.5
                carbon_scale *= 0.5
                carbon_node += 8
            matrix[row + k] = in_octave(water_eighths, water_node, carbon_eighths, carbon_node, table)
        if i + 1 < count:
            near_water = _ADJACENT * (water[i + 1] - water[i])
            near_carbon = _ADJACENT * (carbon[i + 1] - carbon[i])
            matrix[row + i] = transmissivity(near_water, near_carbon, table)
        else:
            matrix[row + i] = 1.0


@kernel
def _downward(matrix: Sequence[float], emission: Sequence[float], i: int, base: int) -> tuple[float, float]:
    """Downward flux at interface i with black air above the last interface, and with black cloud from `base` up."""
    count = len(emission)
    row = i * count
    here = emission[i]
    if i + 1 >= count:
        return here, here
    # the nearest layer by its own mean instead of by its two ends
    flux = here + (matrix[row + i] - 0.5 * matrix[row + i + 1]) * (emission[i + 1] - here)
    cloudy = here
    below = here
    middle = emission[i + 1]
    for k in range(i + 1, count - 1):
        above = emission[k + 1]
        through = matrix[row + k]
        if k == base:
            cloudy = flux + 0.5 * through * (middle - below)
        flux += 0.5 * through * (above - below)
        below = middle
        middle = above
    flux += 0.5 * matrix[row + count - 1] * (middle - below)
    if base == count - 1:
        cloudy = flux
    return flux, cloudy


@kernel
def fluxes(
    matrix: Sequence[float],
    emission: Sequence[float],
    top_flux: float,
    skin_temperature: float,
    emissivity: float,
    cloud_fraction: float,
    cloud_level: int,
    offset: float,
    down: MutableSequence[float],
    up: MutableSequence[float],
) -> None:
    """Write the downward and upward flux [W m-2] at the lowest interfaces, as many as `down` and `up` have room for.

    Parameters
    ----------
    matrix, emission : sequence of float
        From `transmissivities` (with rows = len(down)) and `column_emission`, for m interfaces.
    top_flux : float
        Downward flux at the last of the m interfaces [W m-2]; 0 for space.
    skin_temperature, emissivity : float
        Of the ground [K, 1]; it reflects what it does not absorb.
    cloud_fraction, cloud_level : float, int
        Share of the sky covered, and the interface that is the cloud's base (m - 1 or more: at the last interface).
    offset : float
        Added to the downward flux of the clear share at every interface [W m-2], so that it heats no layer.
    """
    count = len(emission)
    rows = len(down)
    base = min(max(cloud_level, 0), count - 1)
    clear_share = 1.0 - cloud_fraction
    for i in range(rows):
        clear, cloudy = _downward(matrix, emission, i, base)
        clear += offset - matrix[i * count + count - 1] * (emission[count - 1] - top_flux)
        down[i] = clear_share * clear + cloud_fraction * cloudy
    up[0] = emissivity * STEFAN_BOLTZMANN * skin_temperature**4 + (1.0 - emissivity) * down[0]
    # the same sums from below: each row of the matrix is used for every interface above it
    step = up[0] - emission[0] - 0.5 * (emission[1] - emission[0])
    for k in range(1, rows):
        up[k] = emission[k] + matrix[k] * step
    for i in range(rows - 1):
        row = i * count
        if i > 0:
            step = -0.5 * (emission[i + 1] - emission[i - 1])
            for k in range(i + 1, rows):
                up[k] += matrix[row + k] * step
        up[i + 1] -= (matrix[row + i] - 0.5 * matrix[row + i + 1]) * (emission[i + 1] - emission[i])
    for i in range(max(base, 1), rows):
        up[i] = clear_share * up[i] + cloud_fraction * emission[i]


@kernel
def heating(
    pressure: Sequence[float], down: Sequence[float], up: Sequence[float], rate: MutableSequence[float]
) -> None:
    """Write the long-wave heating of every cell into `rate` [K s-1]; `pressure` [Pa], `down`, `up` [W m-2] at interfaces."""
    for k in range(len(rate)):
        gained = (down[k + 1] - up[k + 1]) - (down[k] - up[k])
        rate[k] = gained * GRAVITY / (CP_DRY * (pressure[k] - pressure[k + 1]))


@kernel
def flux_profile(
    pressure: Sequence[float],
    temperature: Sequence[float],
    humidity: Sequence[float],
    upper_water: Sequence[float],
    upper_carbon: Sequence[float],
    upper_emission: Sequence[float],
    skin_temperature: float,
    emissivity: float,
    cloud_fraction: float,
    cloud_level: int,
    offset: float,
    table: Sequence[float],
    water: MutableSequence[float],
    carbon: MutableSequence[float],
    emission: MutableSequence[float],
    matrix: MutableSequence[float],
    down: MutableSequence[float],
    up: MutableSequence[float],
) -> None:
    """Fluxes at all n + 1 interfaces of a column of n cells below fixed air (`forcing.longwave_column.UpperAir`), all in one.

    Work space: `water`, `carbon`, `emission` of n + 1 + m and `matrix` of (n + 1) (n + 1 + m); results in `down`, `up`
    (n + 1). See `column_paths`, `transmissivities`, `column_emission` and `fluxes` for the rest.
    """
    column_paths(pressure, temperature, humidity, upper_water, upper_carbon, water, carbon)
    column_emission(pressure, temperature, upper_emission, emission)
    transmissivities(water, carbon, len(temperature) + 1, table, matrix)
    fluxes(matrix, emission, 0.0, skin_temperature, emissivity, cloud_fraction, cloud_level, offset, down, up)
