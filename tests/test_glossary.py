"""The glossary names every quantity of the result document, with CF names that exist."""

from __future__ import annotations

from slab.glossary import SERIES, SUMMARY, describe, sensor_height


def listed(text: str) -> list[str]:
    return text.split()


# what the JSON result holds
SERIES_KEYS = listed("""time regime mixing_depth_m depth_method residual_top_m theta_K mixing_ratio_g_kg temperature_2m_C
dewpoint_2m_C relative_humidity_2m_pct wind_10m_m_s transport_wind_m_s transport_wind_from_deg ventilation_m2_s
shortwave_down_W_m2 longwave_down_W_m2 net_radiation_W_m2 sensible_flux_W_m2 latent_flux_W_m2 ground_flux_W_m2
condensation_level_m cumulus_fraction inversion_depth_m inversion_strength_K""")
SPRAY_KEYS = listed("""time regime inversion_state temperature_2m_C relative_humidity_2m_pct delta_t_2m_K wind_10m_m_s
temperature_difference_K temperature_difference_per_8m_K inversion_from_m inversion_depth_m share_with_inversion share_inside
status hours_since_break_up rain_mm_h deposit observed_difference_K observed_wind_m_s""")
SUMMARY_KEYS = listed("""mixing_depth_max_m mixing_depth_max_time temperature_2m_max_C temperature_2m_max_time temperature_2m_min_C
temperature_2m_min_time relative_humidity_2m_min_pct inversion_gone_time inversion_heat_needed_MJ_m2
inversion_heat_expected_MJ_m2 convective_temperature_C cumulus_onset_time cumulus_base_m gust_low_m_s gust_high_m_s
transport_wind_m_s ventilation_m2_s sensible_flux_reversal_time inversion_onset_time mixing_end_time inverted_v_depth_m
superadiabatic_excess_K mixing_depth_definition other_definitions ventilation_class dry_outflow_note""")
# CF standard name table, version 93 (2026-03-17): the names this project may use
CF_NAMES = set(
    listed("""time atmosphere_boundary_layer_thickness air_potential_temperature humidity_mixing_ratio air_temperature
dew_point_temperature relative_humidity wind_speed wind_from_direction surface_downwelling_shortwave_flux_in_air
surface_downwelling_longwave_flux_in_air surface_net_downward_radiative_flux surface_upward_sensible_heat_flux
surface_upward_latent_heat_flux downward_heat_flux_at_ground_level_in_soil
atmosphere_lifting_condensation_level_wrt_surface cloud_area_fraction rainfall_rate""")
)
UNIT_ENDINGS = {
    "W_m2": "W m-2", "MJ_m2": "MJ m-2", "m2_s": "m2 s-1", "m_s": "m s-1", "g_kg": "g kg-1", "pct": "%", "deg": "degree",
    "mm_h": "mm h-1", "_C": "degC", "_K": "K", "_m": "m",
}  # fmt: skip


def test_every_key_of_the_result_is_described() -> None:
    assert set(SERIES_KEYS) <= set(SERIES)
    assert set(SUMMARY_KEYS) <= set(SUMMARY)
    assert set(SPRAY_KEYS) <= set(SERIES)


def test_standard_names_are_in_the_cf_table() -> None:
    used = {entry.standard_name for entry in (*SERIES.values(), *SUMMARY.values()) if entry.standard_name}
    assert used <= CF_NAMES


def test_the_unit_agrees_with_the_end_of_the_name() -> None:
    for name, entry in {**SERIES, **SUMMARY}.items():
        for ending, unit in UNIT_ENDINGS.items():
            if name.endswith(ending):
                assert entry.unit == unit, name
                break


def test_every_flux_says_its_sign() -> None:
    fluxes = [entry for name, entry in SERIES.items() if name.endswith("W_m2")]
    assert len(fluxes) == 6
    assert all("positive" in entry.sign for entry in fluxes)


def test_every_temperature_difference_says_its_sign_and_that_it_is_one() -> None:
    found = [entry for name, entry in SERIES.items() if "difference" in name or name.startswith("delta_t")]
    assert len(found) == 4
    for entry in found:
        assert "positive" in entry.sign
        assert entry.temperature == "difference"


def test_quantities_at_asked_heights_are_described() -> None:
    entry = describe("temperature_1.5m_C")
    assert entry is not None
    assert entry.meaning == "air temperature at 1.5 m"
    assert entry.standard_name == "air_temperature"
    assert sensor_height("temperature_1.5m_C") == 1.5
    assert describe("temperature_of_soil") is None
    beside_crop = describe("wind_0_5m_m_s")
    assert beside_crop is not None
    assert beside_crop.meaning == "wind speed at 0.5 m"
