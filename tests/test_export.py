"""Files of the result: strict JSON, CSV with units and two clocks, CF NetCDF; whole or not at all."""

from __future__ import annotations

import csv
import io
import json
import math
import os
import subprocess
import sys
from datetime import datetime
from pathlib import Path

import numpy as np
import pytest
from sample_document import CASES, sample
from scipy.io import netcdf_file

from forcing.errors import DaylayerError
from slab.export import netcdf_bytes, to_csv, to_json, to_netcdf, write_atomically


def refuse(constant: str) -> None:
    raise AssertionError(f"{constant} is not strict JSON")


def test_json_is_strict_and_missing_is_null() -> None:
    document = sample(hours=12)
    document["series"]["mixing_depth_m"][0] = math.nan
    document["series"]["theta_K"] = np.array([math.inf] + [300.0] * 12)
    read = json.loads(to_json(document), parse_constant=refuse)
    assert read["series"]["mixing_depth_m"][0] is None
    assert read["series"]["theta_K"][:2] == [None, 300.0]
    assert math.isnan(document["series"]["mixing_depth_m"][0]), "the document itself is not changed"


def test_json_keys_come_in_one_order_whatever_the_document_has() -> None:
    document = sample(hours=12)
    turned = dict(reversed(document.items())) | {"extra": 1}
    keys = list(json.loads(to_json(turned)))
    assert keys[:4] == ["schema", "title", "site", "profile"]
    assert keys[-1] == "extra"
    assert keys[:-1] == list(json.loads(to_json(document)))


def test_json_refuses_a_time_without_an_offset() -> None:
    with pytest.raises(DaylayerError, match="no offset"):
        to_json({"run": {"start": datetime(2026, 7, 1)}})  # noqa: DTZ001


def test_csv_holds_every_value_with_both_clocks() -> None:
    document = sample(missing=True)
    rows = list(csv.DictReader(io.StringIO(to_csv(document))))
    assert len(rows) == len(document["series"]["time"])
    assert rows[0]["time_utc"] == "2026-07-14T11:00:00Z"
    assert rows[0]["time_local"] == "2026-07-14T05:00:00-06:00"
    for name, values in document["series"].items():
        if name == "time":
            continue
        for row, value in zip(rows, values, strict=True):
            assert row[name] == ("" if value is None else str(value))


def test_netcdf_numbers_come_back_and_carry_cf_names(tmp_path: Path) -> None:
    document = sample(missing=True)
    path = tmp_path / "day.nc"
    to_netcdf(document, path)
    with netcdf_file(path, mmap=False) as file:
        assert file.featureType == b"timeSeries"
        depth = file.variables["mixing_depth_m"]
        assert depth.standard_name == b"atmosphere_boundary_layer_thickness"
        expected = document["series"]["mixing_depth_m"]
        fill = depth._FillValue
        for got, wanted in zip(depth[:], expected, strict=True):
            assert got == (fill if wanted is None else wanted)
        assert b"positive upward" in file.variables["sensible_flux_W_m2"].long_name
        assert "standard_name" not in file.variables["ventilation_m2_s"]._attributes
        assert file.variables["inversion_strength_K"].units_metadata == b"temperature: difference"
        height = file.variables["height_9m"]
        assert float(height.data) == 9.0
        assert b"height_9m" in file.variables["temperature_9m_C"].coordinates
        words = file.variables["regime"]
        meanings = words.flag_meanings.decode().split()
        assert [meanings[n] for n in words[:]] == document["series"]["regime"]


def test_two_writes_of_one_result_are_the_same_bytes() -> None:
    assert netcdf_bytes(sample()) == netcdf_bytes(sample())


@pytest.mark.parametrize("case", ["plain", "missing values", "southern winter"])
def test_netcdf_passes_the_public_checker(case: str, tmp_path: Path) -> None:
    pytest.importorskip("compliance_checker")
    path = tmp_path / "day.nc"
    to_netcdf(sample(**CASES[case]), path)
    command = [sys.executable, "-m", "compliance_checker.cchecker"]
    script = Path(sys.executable).with_name("compliance-checker")
    if script.exists():
        command = [str(script)]
    done = subprocess.run([*command, "-t", "cf:1.11", str(path)], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stdout
    assert "All tests passed" in done.stdout


def test_a_file_is_replaced_whole_and_nothing_is_left_beside_it(tmp_path: Path) -> None:
    path = tmp_path / "day.json"
    path.write_text("old")
    write_atomically(path, "new é\n")
    assert path.read_text(encoding="utf-8") == "new é\n"
    assert os.listdir(tmp_path) == ["day.json"]  # noqa: PTH208


def test_a_place_that_cannot_be_written_is_named_and_left_alone(tmp_path: Path) -> None:
    with pytest.raises(DaylayerError, match=r"nowhere.*existing folder"):
        write_atomically(tmp_path / "nowhere" / "day.csv", "x")
    folder = tmp_path / "folder"
    folder.mkdir()
    with pytest.raises(DaylayerError, match="folder"):
        write_atomically(folder, "x")
    assert os.listdir(tmp_path) == ["folder"]  # noqa: PTH208
