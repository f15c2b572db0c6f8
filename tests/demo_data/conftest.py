"""The demo scans: their folder, their drawing scripts as modules, their files and their truth."""

from __future__ import annotations

import importlib
import json
import sys
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pydicom
import pytest

DEMO = Path(__file__).resolve().parents[2] / "demo_data"
MODULES = ("shapes", "scanner", "dicom_files", "cover", "forearm", "draw")


@pytest.fixture(scope="session")
def drawing():
    """The drawing scripts as modules, by name."""
    sys.path.insert(0, str(DEMO))
    try:
        yield SimpleNamespace(**{name: importlib.import_module(name) for name in MODULES})
    finally:
        sys.path.remove(str(DEMO))


@pytest.fixture(scope="session")
def shapes(drawing):
    return drawing.shapes


def _load(name):
    paths = sorted((DEMO / name).glob("*.dcm"))
    headers = [pydicom.dcmread(path) for path in paths]
    stored = np.stack([header.pixel_array for header in headers])
    first = headers[0]
    return SimpleNamespace(
        name=name,
        folder=DEMO / name,
        paths=paths,
        headers=headers,
        stored=stored,
        values=stored * float(first.RescaleSlope) + float(first.RescaleIntercept),
        truth=json.loads((DEMO / f"{name}-truth.json").read_text(encoding="utf-8")),
        job=DEMO / f"{name}-job.toml",
    )


@pytest.fixture(scope="session")
def cover():
    return _load("cover")


@pytest.fixture(scope="session")
def forearm():
    return _load("forearm")


@pytest.fixture(params=["cover", "forearm"])
def scan(request):
    """Each of the two scans in turn."""
    return request.getfixturevalue(request.param)
