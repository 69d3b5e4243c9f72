"""Every key of a scenario file, what it means, and the example that a written scenario shows."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

#: section -> key -> meaning with unit. The order is the order in which a scenario is written.
KEYS: Mapping[str, Mapping[str, str]] = MappingProxyType(
    {
        "site": {
            "name": "name of the place the forecast is for",
            "latitude": "degrees north",
            "longitude": "degrees east",
            "elevation": "m above sea level",
            "time_zone": "IANA zone name, for local hours",
        },
        "profile": {
            "file": "the morning profile: CSV, TEMP or IGRA text",
            "format": "name of the format, only where it is not recognised",
            "valid": "ISO 8601 with offset, only where the file does not say, or to choose one of many",
            "latitude": "release site, degrees north, where the file does not say and it differs from the site",
            "longitude": "release site, degrees east",
            "elevation": "release site, m above sea level",
            "rebase": "rule that brings the profile to the elevation of the site: sea-level or ground",
            "later": "a forecast or observed later profile; the air above the layer moves linearly in time to it",
            "later_valid": "time of the later profile, ISO 8601 with offset, only where the file does not say",
        },
        "surface": {
            "cover": "land cover, see: daylayer covers; any property of it may be given here as well",
            "soil_moisture": "0 wilting point to 1 field capacity",
            "fluxes": "CSV of surface fluxes (positive upward) instead of the energy balance",
        },
        "weather": {
            "file": "CSV by hour with columns named as below; what it lacks may stand here as a constant",
            "wind_10m_m_s": "wind at 10 m; computed when not given",
            "wind_10m_from_deg": "direction it blows from",
            "pressure_gradient_wind_m_s": "wind that the pressure gradient keeps up; from the profile when not given",
            "pressure_gradient_wind_from_deg": "direction it blows from",
            "cloud_fraction": "0 clear to 1 overcast",
            "cloud_base_m": "m above ground",
            "aerosol_optical_depth": "broadband, 0.05 very clean to 0.4 hazy",
            "ozone_cm": "ozone column, cm",
            "divergence_per_s": "positive = sinking air; w = -D z up to 2 km, then constant",
            "heat_advection_K_h": "K per hour at all heights, positive = warming",
            "moisture_advection_g_kg_h": "g/kg per hour at all heights, positive = moistening",
            "rain_mm_h": "rain",
            "shortwave_down_W_m2": "measured short-wave radiation, positive downward",
            "longwave_down_W_m2": "measured long-wave radiation, positive downward",
            "net_radiation_W_m2": "measured net radiation, positive downward",
            "temperature_2m_C": "measured, to compare with",
            "dewpoint_2m_C": "measured, to compare with",
        },
        "run": {
            "hours": "length of the run, h",
            "output_minutes": "minutes between rows of the result",
            "entrainment": "sheared, buoyant or encroachment",
            "flux_ratio": "entrained to surface virtual heat flux",
            "shear_factor": "factor of friction in the growth; left to the closure when not given",
            "spin_up_factor": "factor of the spin-up of the jump; left to the closure when not given",
        },
        "limits": {
            "authority": "whose limits these are",
            "dated": "date of the limits",
            "wind_height_m": "height of the wind limits, m above ground",
            "wind_min_m_s": "least wind",
            "wind_max_m_s": "most wind",
            "delta_t_min_K": "least dry minus wet bulb",
            "delta_t_max_K": "most dry minus wet bulb",
            "hours_after_sunrise": "hours from sunrise",
            "hours_before_sunset": "hours to sunset",
            "temperature_max_C": "highest temperature",
            "humidity_min_pct": "lowest relative humidity",
            "rain_free_hours": "hours without rain that must follow",
            "ventilation": "classes, lowest first: [{ name = ..., from_m2_s = ... }] or from_kt_ft",
        },
    }
)

#: Dotted key -> first-use flag, for messages.
FLAGS: Mapping[str, str] = MappingProxyType(
    {
        "profile.file": "--profile",
        "profile.valid": "--valid",
        "profile.rebase": "--rebase",
        "site.latitude": "--latitude",
        "site.longitude": "--longitude",
        "site.elevation": "--elevation",
        "site.time_zone": "--zone",
        "surface.cover": "--cover",
        "surface.soil_moisture": "--soil-moisture",
        "weather.cloud_fraction": "--cloud",
        "weather.pressure_gradient_wind_m_s": "--wind",
        "weather.pressure_gradient_wind_from_deg": "--wind-from",
        "run.hours": "--hours",
    }
)
