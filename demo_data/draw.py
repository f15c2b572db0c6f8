"""Draws the demo scans anew: python demo_data/draw.py [cover] [forearm]."""

from __future__ import annotations

import json
import sys
from pathlib import Path

import cover
import forearm
import numpy as np
from dicom_files import write_series

HERE = Path(__file__).resolve().parent


def draw_cover(target: Path = HERE) -> None:
    """The component: grey values, elements of group 0014 (DICONDE, ASTM E2339), no birth date and no sex."""
    facts = {
        "PatientName": "Housing cover HC-7, casting 0042",
        "PatientID": "HC-7-0042",
        "StudyDate": "20260504",
        "StudyTime": "093000",
        "SeriesDescription": "housing cover, full part",
        "Manufacturer": "Invented Tubes and Detectors",
        "ManufacturerModelName": "Bench CT 225",
        "ComponentManufacturingProcedure": "High-pressure die casting",
        "ComponentManufacturer": "Invented Castings",
        "MaterialGrade": "AlSi9Cu3-like alloy",
        "KVP": 160,
        "XRayTubeCurrent": 2,
        "RescaleSlope": 1,
        "RescaleIntercept": 0,
        "RescaleType": "US",
    }
    write_series(target / "cover", cover.draw(), cover.SPACING, cover.ORIGIN, facts)
    _write(target / "cover-truth.json", cover.truth())


def draw_forearm(target: Path = HERE) -> None:
    """The training phantom: CT numbers in 12 bits, recorded the way a patient is."""
    facts = {
        "PatientName": "Phantom^Training Arm",
        "PatientID": "TRAINING-ARM-3",
        "PatientSex": "O",
        "StudyDate": "20260511",
        "StudyTime": "141500",
        "StudyDescription": "Training phantom",
        "SeriesDescription": "training arm 1.25 mm smooth",
        "BodyPartExamined": "FOREARM",
        "PatientPosition": "HFS",
        "Manufacturer": "Invented Scanners",
        "KVP": 120,
        "XRayTubeCurrent": 110,
        "ConvolutionKernel": "SMOOTH-2",
        "GantryDetectorTilt": 0,
        "ReconstructionDiameter": round(forearm.SHAPE[2] * forearm.SPACING[2], 3),
        "WindowCenter": 50,
        "WindowWidth": 400,
        "RescaleSlope": 1,
        "RescaleIntercept": forearm.LOWEST,
        "RescaleType": "HU",
    }
    stored = (forearm.draw() - forearm.LOWEST).astype(np.uint16)
    write_series(target / "forearm", stored, forearm.SPACING, forearm.ORIGIN, facts, bits=12)
    _write(target / "forearm-truth.json", forearm.truth())


def _write(path: Path, truth: dict) -> None:
    path.write_text(json.dumps(truth, indent=2, ensure_ascii=False) + "\n", encoding="utf-8")


if __name__ == "__main__":
    wanted = sys.argv[1:] or ["cover", "forearm"]
    for name in wanted:
        {"cover": draw_cover, "forearm": draw_forearm}[name]()
