"""What is kept at every knot of a run, by name; one row of the record per knot."""

from __future__ import annotations

from collections.abc import Sequence

from forcing.air import KAPPA, P_REFERENCE
from forcing.speed import kernel
from forcing.surface import Ground, screen
from slab.daytime import EAST, HEAT, MASS, MEMBERS, NORTH, VAPOUR, Flow, Offsets, Place

Numbers = Sequence[float]

NAMES = (
    "depth", "mass", "theta", "humidity", "east", "north", "jump_theta", "jump_humidity", "jump_virtual",
    "entrainment", "convective_velocity", "buoyancy_flux", "cumulus_fraction", "shortwave_down", "longwave_down",
    "net_radiation", "sensible", "latent", "ground", "skin_temperature", "friction_velocity", "inverse_obukhov",
    "temperature_2m", "humidity_2m", "wind_10m", "sunk", "warmed", "moistened", "later", "heat", "vapour",
    "surface_heat", "surface_vapour", "aloft_heat", "aloft_vapour", "sensible_energy", "ground_energy",
)  # fmt: skip
INDEX = {name: i for i, name in enumerate(NAMES)}
FIELDS = len(NAMES)
FIRST_SUM = INDEX["surface_heat"]
SUMS = 6


@kernel
def write_record(out: list[float], y: Numbers, flow: Flow, at: Offsets, place: Place, ground: Ground,
                 heights: Numbers) -> None:  # fmt: skip
    """Fill one row of the record by day; behind the named fields come temperatures [K] at ``heights`` [m]."""
    exchange = flow.exchange
    air_temperature = flow.theta * (place.pressure / P_REFERENCE) ** KAPPA
    low = screen(ground, exchange, air_temperature, flow.humidity, flow.reference_height, flow.wind_speed,
                 flow.wind_height, place.pressure, 2.0)  # fmt: skip
    high = screen(ground, exchange, air_temperature, flow.humidity, flow.reference_height, flow.wind_speed,
                  flow.wind_height, place.pressure, 10.0)  # fmt: skip
    row = (
        flow.depth, y[MASS], flow.theta, flow.humidity, y[EAST], y[NORTH], flow.jump_theta, flow.jump_humidity,
        flow.jump_virtual, flow.entrainment, flow.convective_velocity, flow.buoyancy_flux, flow.cumulus,
        flow.shortwave, flow.longwave, exchange.net_radiation, exchange.sensible, exchange.latent, exchange.ground,
        exchange.skin_temperature, exchange.friction_velocity, exchange.inverse_obukhov, low.temperature,
        low.humidity, high.wind, at.sunk, at.warmed, at.moistened, at.later, y[HEAT], y[VAPOUR],
    )  # fmt: skip
    for j in range(len(row)):
        out[j] = row[j]
    for j in range(SUMS):
        out[FIRST_SUM + j] = y[MEMBERS - SUMS + j]

    for j in range(len(heights)):
        out[FIELDS + j] = screen(ground, exchange, air_temperature, flow.humidity, flow.reference_height,
                                 flow.wind_speed, flow.wind_height, place.pressure, heights[j]).temperature  # fmt: skip
