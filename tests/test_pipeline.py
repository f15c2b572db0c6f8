"""The whole job on the demo scans, against the truth that they were drawn from."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest

from tomofolio.clock import run_time
from tomofolio.deliver import measurements
from tomofolio.errors import CallError
from tomofolio.pipeline import Order, make_case
from tomofolio.volume import Kind

DEMO = Path(__file__).resolve().parents[1] / "demo_data"


@pytest.fixture(scope="module")
def cover():
    case = make_case(Order(DEMO / "cover", job=DEMO / "cover-job.toml"))
    return case, measurements(case), json.loads((DEMO / "cover-truth.json").read_text(encoding="utf-8"))


@pytest.fixture(scope="module")
def forearm():
    case = make_case(Order(DEMO / "forearm"))
    return case, measurements(case), json.loads((DEMO / "forearm-truth.json").read_text(encoding="utf-8"))


def distance(item, position):
    return float(np.linalg.norm(np.subtract(item["position_mm"], position)))


def test_cover_is_a_component_with_the_casting_preset(cover):
    case, _, _ = cover
    assert case.kind is Kind.COMPONENT and case.preset.name == "casting" and case.keep_identity


def test_every_void_of_the_cover_is_found_once_and_its_interval_holds_the_truth(cover):
    _, figures, truth = cover
    lone = [v for v in truth["closed_voids"] if not v["name"].startswith("touching")]
    held = 0
    for void in lone:
        near = [item for item in figures["voids"]["items"] if distance(item, void["position_mm"]) < 0.25]
        assert len(near) == 1, void["name"]
        low, high = near[0]["volume_mm3_95"]
        held += low <= void["volume_mm3"] <= high
        assert near[0]["ligament_mm"] == pytest.approx(void["ligament_mm"], abs=0.35 * 0.25 + 0.2)
    # Ten intervals of 95 %: three or more outside would happen once in 90 times (binomial).
    assert held >= len(lone) - 2


def test_the_touching_pair_holds_the_volume_of_both(cover):
    _, figures, truth = cover
    pair = [v for v in truth["closed_voids"] if v["name"].startswith("touching")]
    middle = np.mean([v["position_mm"] for v in pair], axis=0)
    found = [item for item in figures["voids"]["items"] if distance(item, middle) < 1.5]
    total = sum(v["volume_mm3"] for v in pair)
    assert sum(item["volume_mm3"] for item in found) == pytest.approx(total, rel=0.06)


def test_no_void_is_found_where_none_was_drawn(cover):
    _, figures, truth = cover
    places = [v["position_mm"] for v in truth["closed_voids"]]
    for item in figures["voids"]["items"]:
        assert min(distance(item, place) for place in places) < 0.8, item["id"]


def test_porosity_part_volume_and_inclusion_agree_with_the_truth(cover):
    _, figures, truth = cover
    assert figures["voids"]["porosity_percent"] == pytest.approx(truth["porosity_percent"], rel=0.04)
    assert figures["part"]["volume_mm3"] == pytest.approx(truth["part_volume_mm3"], rel=0.003)
    (inclusion,) = figures["inclusions"]["items"]
    assert distance(inclusion, truth["inclusion"]["position_mm"]) < 0.1
    assert inclusion["volume_mm3"] == pytest.approx(truth["inclusion"]["volume_mm3"], rel=0.1)


def test_noise_and_blur_of_the_cover_agree_with_the_truth(cover):
    _, figures, truth = cover
    assert figures["fitness"]["noise"] == pytest.approx(truth["noise"], rel=0.05)
    assert figures["fitness"]["blur_sigma_mm"] == pytest.approx(truth["blur_sigma_with_voxel_mm"], rel=0.08)


def test_forearm_is_a_patients_scan_without_voids_and_with_hidden_identity(forearm):
    case, figures, _ = forearm
    assert case.kind is Kind.PATIENT and case.preset.name == "case-note" and not case.keep_identity
    assert figures["voids"] is None and figures["inclusions"] is None
    assert figures["series"]["uid"] is None


def test_forearm_has_air_fat_muscle_and_bone_at_their_levels(forearm):
    _, figures, truth = forearm
    peaks = [row["peak"] for row in figures["ranges"]]
    wanted = [truth["levels"][name] for name in ("air", "fat-like", "muscle-like", "dense wall")]
    assert len(peaks) == 4
    np.testing.assert_allclose(peaks, wanted, atol=50)
    assert [row["background"] for row in figures["ranges"]] == [True, False, False, False]


def test_dense_walls_of_the_forearm_have_their_closed_form_volume(forearm):
    # The beads of the marker fall into the same range.
    _, figures, truth = forearm
    expected = truth["dense_wall_volume_mm3"] + truth["sampled_volumes_mm3"]["marker"]
    assert figures["ranges"][-1]["volume_mm3"] == pytest.approx(expected, rel=0.05)


def test_table_under_the_forearm_is_left_out_and_listed(forearm):
    _, figures, truth = forearm
    assert figures["part"]["volume_mm3"] == pytest.approx(truth["arm_volume_mm3"], rel=0.02)
    (table,) = [thing for thing in figures["part"]["excluded"] if "support" in thing["name"]]
    assert table["volume_mm3"] == pytest.approx(truth["sampled_volumes_mm3"]["table"], rel=0.15)


@pytest.mark.parametrize("name", ["engine_block", "head_tilted_uneven"])
def test_real_scans_give_the_ranges_that_a_reader_expects(name):
    scan = DEMO.parent.parent / "shared" / "data" / name
    if not scan.is_dir():
        pytest.skip(f"{scan} is not here")
    case = make_case(Order(scan, preset="casting" if name == "engine_block" else None))
    peaks = [item.peak for item in case.ranges.items]
    if name == "engine_block":
        # Air, the alloy and the harder metal (saturated at 255 of 255).
        assert len(peaks) == 3 and peaks[0] < 10 and 135 < peaks[1] < 150 and peaks[2] > 200
        assert case.kind is Kind.COMPONENT
    else:
        # CT numbers of air, soft tissue and bone, from memory: about −1000, 20 to 60, above 300.
        assert peaks[0] < -900 and any(0 < p < 80 for p in peaks) and peaks[-1] > 300
        assert case.kind is Kind.PATIENT and case.findings.voids is None
        assert case.volume.grid.tilt_degrees == pytest.approx(18.5, abs=0.01)


def test_names_that_do_not_fit_the_ranges_are_a_wrong_call(tmp_path):
    sheet = tmp_path / "job.toml"
    sheet.write_text('[ranges]\nnames = ["air"]\n', encoding="utf-8")
    with pytest.raises(CallError, match="range"):
        make_case(Order(DEMO / "cover", job=sheet))


def test_date_of_the_run_can_be_set(monkeypatch):
    monkeypatch.setenv("SOURCE_DATE_EPOCH", "86400")
    assert run_time() == "1970-01-02T00:00:00+00:00"
