"""The data file holds the interface's keys and only finite numbers."""

from __future__ import annotations

import csv
import io
import itertools
import json
from dataclasses import replace

import numpy as np
import pytest

from tomofolio.deliver import measurements, measurements_text, ranges_csv, voids_csv
from tomofolio.pipeline import Order, make_case

SPOT = {
    "id", "volume_mm3", "volume_mm3_95", "threshold_volume_mm3", "equivalent_diameter_mm", "feret_max_mm", "sphericity",
    "position_mm", "ligament_mm", "nearest_mm", "contrast", "open",
}  # fmt: skip
SPOTS = {"count", "total_mm3", "total_mm3_95", "porosity_percent", "porosity_percent_95", "densest", "items"}
#: The interface's keys, copied from its description.
KEYS = {
    "series": {"uid", "pixels_sha256", "shape", "spacing_mm", "slice_positions_mm", "origin_mm", "direction"},
    "unit": {"quantity", "symbol", "basis"},
    "fitness": {
        "noise", "contrast", "cnr", "blur_sigma_mm", "mtf10_per_mm", "detectable_diameter_mm", "measurable_diameter_mm",
        "findings",
    },
    "part": {"volume_mm3", "volume_mm3_95", "surface_mm2", "mass_g", "mass_g_95", "excluded"},
    "voids": SPOTS,
    "inclusions": SPOTS,
    "provenance": {"parameters", "libraries", "created"},
}  # fmt: skip
RANGE = {
    "id", "name", "named_by", "lower", "lower_95", "upper", "upper_95", "peak", "spread", "volume_mm3", "volume_mm3_95",
    "share", "mean", "sd", "regions", "largest_region_mm3", "background",
}  # fmt: skip


@pytest.fixture(scope="module")
def case(block_series):
    return make_case(Order(block_series, preset="casting"))


@pytest.fixture(scope="module")
def document(case):
    return json.loads(measurements_text(case))


def test_every_key_of_the_interface_is_there(document):
    assert document["schema"] == "tomofolio-measurements-1"
    assert set(document["tool"]) == {"name", "version"}
    for key, wanted in KEYS.items():
        assert set(document[key]) == wanted, key
    assert document["voids"]["items"]
    for item in document["voids"]["items"]:
        assert set(item) == SPOT
    for row in document["ranges"]:
        assert set(row) == RANGE


def test_first_and_last_range_are_open_ended_and_neighbours_meet(document):
    rows = document["ranges"]
    assert rows[0]["lower"] is None and rows[-1]["upper"] is None
    for below, above in itertools.pairwise(rows):
        assert below["upper"] == above["lower"]


def test_positions_can_be_rebuilt_from_the_series_facts(document):
    # The plane equation of DICOM PS3.3 C.7.6.2.1.1 (from memory) with the values that the fixture wrote.
    series = document["series"]
    direction = np.array(series["direction"])
    k, j, i = 3, 4, 5
    position = series["origin_mm"] + direction @ [
        i * series["spacing_mm"][2],
        j * series["spacing_mm"][1],
        series["slice_positions_mm"][k],
    ]
    np.testing.assert_allclose(position, [-6.4 + 5 * 0.2, -6.4 + 4 * 0.2, 3 * 0.2])


def test_what_is_not_finite_becomes_null(case):
    broken = replace(case, fitness=replace(case.fitness, noise=float("nan"), cnr=float("inf")))
    document = json.loads(measurements_text(broken), parse_constant=lambda name: pytest.fail(name))
    assert document["fitness"]["noise"] is None and document["fitness"]["cnr"] is None


def test_void_table_has_units_in_one_header_row_and_the_figures_of_the_document(case):
    text = voids_csv(case)
    assert text.startswith("\ufeff")
    rows = list(csv.reader(io.StringIO(text[1:])))
    assert "volume (mm³)" in rows[0]
    volumes = [float(row[rows[0].index("volume (mm³)")]) for row in rows[1:] if row[0] == "void"]
    assert volumes == [item["volume_mm3"] for item in measurements(case)["voids"]["items"]]
    assert volumes == sorted(volumes, reverse=True)


def test_a_name_that_a_spreadsheet_would_run_is_quoted(case):
    items = tuple(replace(item, name="=1+1") for item in case.ranges.items)
    text = ranges_csv(replace(case, ranges=replace(case.ranges, items=items)))
    assert "'=1+1" in text and ",=1+1" not in text
