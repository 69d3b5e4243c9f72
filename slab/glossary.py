"""The names of the result document: unit, meaning, sign and standard name, in one table.

Text headers, CSV columns and NetCDF attributes all read it, so that a quantity is described once.
Standard names are those of the CF standard name table, version 93 (2026-03-17); a quantity without one there has ``None``.
"""

from __future__ import annotations

import re
from typing import NamedTuple

__all__ = ["SERIES", "SUMMARY", "Entry", "describe", "sensor_height"]


class Entry(NamedTuple):
    """What one name of the result document means.

    Attributes
    ----------
    unit : str
        UDUNITS string; empty for words and times.
    meaning : str
        In words, with the height or the layer it holds for.
    sign : str
        Which direction counts positive; empty where there is none.
    standard_name : str or None
        Name in the CF table.
    temperature : str
        ``on_scale``, ``difference`` or empty: what CF 1.11 asks of every temperature.
    """

    unit: str
    meaning: str
    sign: str = ""
    standard_name: str | None = None
    temperature: str = ""


_DOWN = "positive downward"
_UP = "positive upward"
_INVERTED = "positive warmer above, which is an inversion"
_PRODUCT = "mixing depth times transport wind"

SERIES: dict[str, Entry] = {
    "time": Entry("", "time, UTC", "", "time"),
    "regime": Entry("", "what the lowest air is doing"),
    "mixing_depth_m": Entry(
        "m",
        "top of the mixing layer above ground",
        "positive upward from the ground",
        "atmosphere_boundary_layer_thickness",
    ),
    "depth_method": Entry("", "definition behind the mixing depth of the hour"),
    "residual_top_m": Entry("m", "top of the residual layer above ground", "positive upward from the ground"),
    "theta_K": Entry(
        "K",
        "potential temperature of the mixing layer, reference 1000 hPa",
        "",
        "air_potential_temperature",
        "on_scale",
    ),
    "mixing_ratio_g_kg": Entry(
        "g kg-1", "water vapour of the mixing layer per mass of dry air", "", "humidity_mixing_ratio"
    ),
    "temperature_2m_C": Entry("degC", "air temperature at 2 m", "", "air_temperature", "on_scale"),
    "dewpoint_2m_C": Entry("degC", "dew point at 2 m", "", "dew_point_temperature", "on_scale"),
    "relative_humidity_2m_pct": Entry("%", "relative humidity over water at 2 m", "", "relative_humidity"),
    "wind_10m_m_s": Entry("m s-1", "wind speed at 10 m", "", "wind_speed"),
    "transport_wind_m_s": Entry("m s-1", "speed of the vector mean wind through the mixing depth", "", "wind_speed"),
    "transport_wind_from_deg": Entry(
        "degree", "direction the transport wind comes from", "clockwise from north", "wind_from_direction"
    ),
    "ventilation_m2_s": Entry("m2 s-1", _PRODUCT),
    "shortwave_down_W_m2": Entry(
        "W m-2", "solar radiation reaching the ground", _DOWN, "surface_downwelling_shortwave_flux_in_air"
    ),
    "longwave_down_W_m2": Entry(
        "W m-2", "thermal radiation reaching the ground", _DOWN, "surface_downwelling_longwave_flux_in_air"
    ),
    "net_radiation_W_m2": Entry("W m-2", "net radiation of the surface", _DOWN, "surface_net_downward_radiative_flux"),
    "sensible_flux_W_m2": Entry(
        "W m-2", "sensible heat from the surface to the air", _UP, "surface_upward_sensible_heat_flux"
    ),
    "latent_flux_W_m2": Entry(
        "W m-2", "latent heat from the surface to the air", _UP, "surface_upward_latent_heat_flux"
    ),
    "ground_flux_W_m2": Entry(
        "W m-2", "heat into the soil", "positive into the ground", "downward_heat_flux_at_ground_level_in_soil"
    ),
    "condensation_level_m": Entry(
        "m",
        "condensation level of mixing-layer air above ground",
        "positive upward from the ground",
        "atmosphere_lifting_condensation_level_wrt_surface",
    ),
    "cumulus_fraction": Entry("1", "part of the sky under cumulus at the layer's top", "", "cloud_area_fraction"),
    "inversion_depth_m": Entry("m", "top of the surface inversion above ground", "positive upward from the ground"),
    "inversion_strength_K": Entry(
        "K", "temperature at the inversion top minus that near the ground", "positive warmer aloft", None, "difference"
    ),
    # the spray calendar's
    "inversion_state": Entry("", "surface inversion: in every run of the set, possible, in none, or not known"),
    "inversion_from_m": Entry("m", "base of the surface inversion above ground", "positive upward from the ground"),
    "delta_t_2m_K": Entry(
        "K", "dry minus wet bulb temperature at 2 m (thermodynamic wet bulb)", "positive in unsaturated air", None,
        "difference",
    ),
    "temperature_difference_K": Entry(
        "K", "air temperature at the upper minus that at the lower of two heights", _INVERTED, None, "difference"
    ),
    "temperature_difference_per_8m_K": Entry(
        "K", "the temperature difference scaled to 8 m between the heights", _INVERTED, None, "difference"
    ),
    "share_with_inversion": Entry("1", "share of the runs of the set that have an inversion"),
    "share_inside": Entry("1", "share of the runs of the set inside all given limits and without an inversion"),
    "status": Entry("", "the hour beside the given limits: inside, outside, unknown, or conditions only"),
    "hours_since_break_up": Entry("h", "time since the last inversion ended"),
    "rain_mm_h": Entry("mm h-1", "rain as water depth per time, as given", "", "rainfall_rate"),
    "deposit": Entry("", "dew or hoar frost on the ground, of the model's own"),
    "observed_difference_K": Entry(
        "K", "measured air temperature at the upper minus that at the lower of two heights", _INVERTED, None,
        "difference",
    ),
    "observed_wind_m_s": Entry("m s-1", "measured wind speed at the tower's own height", "", "wind_speed"),
}  # fmt: skip

_TIME = "UTC"
SUMMARY: dict[str, Entry] = {
    "mixing_depth_max_m": Entry("m", "greatest mixing depth above ground"),
    "mixing_depth_max_time": Entry("", f"hour of the greatest mixing depth, {_TIME}"),
    "mixing_depth_definition": Entry("", "definition behind the mixing depth"),
    "other_definitions": Entry("m", "top of the same computed profile by other definitions"),
    "temperature_2m_max_C": Entry("degC", "highest temperature at 2 m", "", None, "on_scale"),
    "temperature_2m_max_time": Entry("", f"hour of the highest temperature, {_TIME}"),
    "temperature_2m_min_C": Entry("degC", "lowest temperature at 2 m", "", None, "on_scale"),
    "temperature_2m_min_time": Entry("", f"hour of the lowest temperature, {_TIME}"),
    "relative_humidity_2m_min_pct": Entry("%", "lowest relative humidity at 2 m"),
    "inversion_gone_time": Entry("", f"time the morning inversion is gone, {_TIME}"),
    "inversion_heat_needed_MJ_m2": Entry("MJ m-2", "heat that erases the morning inversion", "positive into the air"),
    "inversion_heat_expected_MJ_m2": Entry("MJ m-2", "heat the surface is expected to give", "positive into the air"),
    "convective_temperature_C": Entry("degC", "2 m temperature at which cumulus can form", "", None, "on_scale"),
    "cumulus_onset_time": Entry("", f"first cumulus, {_TIME}; null when none forms"),
    "cumulus_base_m": Entry("m", "cumulus base above ground"),
    "gust_low_m_s": Entry("m s-1", "lower end of the gust range mixed down"),
    "gust_high_m_s": Entry("m s-1", "upper end of the gust range mixed down"),
    "transport_wind_m_s": Entry("m s-1", "transport wind at the greatest mixing depth"),
    "ventilation_m2_s": Entry("m2 s-1", f"{_PRODUCT} at the greatest mixing depth"),
    "ventilation_class": Entry("", "class of the user's own ventilation table, with authority and date"),
    "sensible_flux_reversal_time": Entry("", f"sensible heat turns downward, {_TIME}"),
    "inversion_onset_time": Entry("", f"surface inversion forms, {_TIME}"),
    "inversion_onset_window": Entry("", f"between which times the inversion forms, {_TIME}"),
    "inversion_gone_window": Entry("", f"between which times the morning inversion is gone, {_TIME}"),
    "relative_humidity_2m_min_time": Entry("", f"hour of the lowest relative humidity, {_TIME}"),
    "dew_onset_time": Entry("", f"first dew of the first night, {_TIME}"),
    "hoar_frost_onset_time": Entry("", f"first hoar frost of the first night, {_TIME}"),
    "air_frost_onset_time": Entry("", f"2 m temperature first under 0 degC in the first night, {_TIME}"),
    "fog_onset_time": Entry("", f"lowest air first saturated in the first night, {_TIME}; an onset only"),
    "fog_depth_max_m": Entry("m", "greatest depth of saturated air on the ground in the first night"),
    "mixed_night_wind_m_s": Entry("m s-1", "least wind that would have kept the air mixed through the first night"),
    "mixed_night_wind_height_m": Entry("m", "height above ground of that wind"),
    "mixing_end_time": Entry("", f"convective mixing ends, {_TIME}"),
    "inverted_v_depth_m": Entry("m", "depth of the dry-adiabatic layer under the condensation level"),
    "dry_outflow_note": Entry("", "note when dry outflow gusts are plausible"),
    "superadiabatic_excess_K": Entry(
        "K",
        "2 m potential temperature above the mixing layer's at its warmest",
        "positive warmer near the ground",
        None,
        "difference",
    ),
}

_HEIGHT_NAME = re.compile(r"(temperature|dewpoint|relative_humidity|wind)_(\d+(?:[._]\d+)?)m_(C|pct|m_s)")


def sensor_height(name: str) -> float | None:
    """Height [m above ground] that a series name carries, or None when it carries none."""
    match = _HEIGHT_NAME.fullmatch(name)
    return float(match[2].replace("_", ".")) if match else None


def describe(name: str) -> Entry | None:
    """Entry of a series name, also for quantities at asked heights; None when the name is not one of ours."""
    if name in SERIES:
        return SERIES[name]
    match = _HEIGHT_NAME.fullmatch(name)
    if match is None:
        return None
    level = {"temperature": 2, "dewpoint": 2, "relative_humidity": 2, "wind": 10}[match[1]]
    like = SERIES[f"{match[1]}_{level}m_{match[3]}"]
    return like._replace(meaning=like.meaning.replace(f"at {level} m", f"at {sensor_height(name):g} m"))
