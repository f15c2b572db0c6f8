"""Draws the demo scans anew: python demo_data/draw.py [cover] [forearm]."""

from __future__ import annotations

import json
import sys
from pathlib import Path

import cover
import forearm
from dicom_files import write_series

HERE = Path(__file__).resolve().parent


def draw_cover() -> None:
    """The component: grey values, elements of group 0014 (DICONDE), no birth date and no sex."""
    stored, truth = cover.draw()
    facts = {
        "PatientName": "Housing cover HC-7, casting 0042",
        "PatientID": "HC-7-0042",
        "PatientBirthDate": "",
        "PatientSex": "",
        "StudyDate": "20260504",
        "SeriesDescription": "housing cover, full part",
        "Manufacturer": "Invented Tubes and Detectors",
        "ManufacturerModelName": "Bench CT 225",
        "KVP": 160,
        "XRayTubeCurrent": 2,
        "RescaleSlope": 1,
        "RescaleIntercept": 0,
        "RescaleType": "US",
    }
    component = {(0x0014, 0x0028): ("ST", "Die-cast housing cover"), (0x0014, 0x0042): ("ST", "AlSi9Cu3-like alloy")}
    write_series(HERE / "cover", stored, cover.SPACING, cover.ORIGIN, facts, component)
    _write(HERE / "cover-truth.json", truth)


def draw_forearm() -> None:
    """The training phantom: CT numbers, recorded the way a patient is."""
    stored, truth = forearm.draw()
    facts = {
        "PatientName": "Phantom^Training Arm",
        "PatientID": "TRAINING-ARM-3",
        "PatientBirthDate": "19000101",
        "PatientSex": "O",
        "StudyDate": "20260511",
        "SeriesDescription": "training arm 1.25 mm smooth",
        "BodyPartExamined": "FOREARM",
        "PatientPosition": "HFS",
        "Manufacturer": "Invented Scanners",
        "KVP": 120,
        "XRayTubeCurrent": 110,
        "ConvolutionKernel": "SMOOTH-2",
        "ReconstructionDiameter": round(forearm.SHAPE[2] * forearm.SPACING[2], 3),
        "WindowCenter": 50,
        "WindowWidth": 400,
        "RescaleSlope": 1,
        "RescaleIntercept": 0,
        "RescaleType": "HU",
    }
    write_series(HERE / "forearm", stored, forearm.SPACING, forearm.ORIGIN, facts)
    _write(HERE / "forearm-truth.json", truth)


def _write(path: Path, truth: dict) -> None:
    path.write_text(json.dumps(truth, indent=2, ensure_ascii=False) + "\n", encoding="utf-8")


if __name__ == "__main__":
    wanted = sys.argv[1:] or ["cover", "forearm"]
    for name in wanted:
        {"cover": draw_cover, "forearm": draw_forearm}[name]()
