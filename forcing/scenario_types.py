"""The scenario as typed, checked objects: frozen data with no rules in it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from forcing.cover import Cover
    from forcing.sounding import Profile
    from forcing.weather import FluxTable, Weather

#: A scenario as plain values: ``title`` and one mapping per section; file names are absolute.
Settings = Mapping[str, object]

ENTRAINMENTS = ("sheared", "buoyant", "encroachment")
REBASE_RULES = ("sea-level", "ground")


@dataclass(frozen=True, slots=True)
class Site:
    """Where the forecast is for: degrees north, degrees east, m above sea level, IANA zone name."""

    name: str
    latitude: float
    longitude: float
    elevation: float
    time_zone: str


@dataclass(frozen=True, slots=True)
class RunOptions:
    """How the run is made; None leaves a factor to the closure."""

    hours: float = 36.0
    output_minutes: float = 60.0
    entrainment: str = "sheared"
    flux_ratio: float = 0.2
    shear_factor: float | None = None
    spin_up_factor: float | None = None


@dataclass(frozen=True, slots=True)
class VentilationClass:
    """A class of the user's own table: it starts at a ventilation rate [m2 s-1] and ends where the next one starts."""

    name: str
    from_m2_s: float


@dataclass(frozen=True, slots=True)
class Limits:
    """The user's own limits, with who set them and when; None where the user sets none.

    Wind m/s at ``wind_height_m`` above ground, Delta-T K, temperature degrees C, humidity percent.
    """

    authority: str
    dated: str
    wind_height_m: float | None = None
    wind_min_m_s: float | None = None
    wind_max_m_s: float | None = None
    delta_t_min_K: float | None = None
    delta_t_max_K: float | None = None
    hours_after_sunrise: float | None = None
    hours_before_sunset: float | None = None
    temperature_max_C: float | None = None
    humidity_min_pct: float | None = None
    rain_free_hours: float | None = None
    ventilation: tuple[VentilationClass, ...] = ()


@dataclass(frozen=True, slots=True)
class Assumption:
    """An input of the run, where it comes from, and what a plausible step in it would be.

    Attributes
    ----------
    name, value_text : str
        The input and its value in words.
    source : str
        "observed", "given" or "assumed".
    why : str
        Why this value.
    step : str
        A plausible step in words, empty where none is taken.
    key : str
        Dotted scenario key.
    stepped : float, str or None
        Value of the key to rerun with, None where there is no step to take.
    """

    name: str
    value_text: str
    source: str
    why: str
    step: str = ""
    key: str = ""
    stepped: float | str | None = None


@dataclass(frozen=True, slots=True)
class Scenario:
    """Everything known before the run.

    Attributes
    ----------
    profile : Profile
        The morning profile on the site's ground.
    later : Profile or None
        A later profile on the site's ground that the air above the layer moves to.
    original : Profile
        The morning profile as released, before re-basing; the same object as `profile` where none was needed.
    rebase : str
        Rule that brought the profile to the site's elevation, empty where none was needed.
    cover : Cover
        Land cover with the overrides of the scenario.
    soil_moisture : float
        0 wilting point to 1 field capacity.
    settings : mapping
        The scenario as plain values, to write out or to change and build again.
    file_names : mapping
        Dotted key of every file to its name as it was given, for what is shown instead of a path on this machine.
    """

    title: str
    site: Site
    profile: Profile
    later: Profile | None
    cover: Cover
    soil_moisture: float
    fluxes: FluxTable | None
    weather: Weather
    run: RunOptions
    limits: Limits | None
    assumptions: tuple[Assumption, ...]
    source: str
    text: str
    original: Profile
    later_original: Profile | None = None
    rebase: str = ""
    settings: Settings = field(default_factory=dict)
    file_names: Mapping[str, str] = field(default_factory=dict)

    @property
    def start(self) -> float:
        """First second of the run, since 1970 UTC: the time of the morning profile."""
        return self.profile.valid.timestamp()

    @property
    def end(self) -> float:
        """Last second of the run, since 1970 UTC."""
        return self.start + 3600.0 * self.run.hours
