"""Fixtures for all rooms: a small component as a DICOM series, written with pydicom alone."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pydicom
import pytest
from pydicom.dataset import FileDataset, FileMetaDataset
from pydicom.uid import CTImageStorage, ExplicitVRLittleEndian, generate_uid
from scipy import ndimage

SPACING_MM = 0.2
#: centre (slice, row, column) and radius in voxels of the voids in the little block
VOIDS = (((16.0, 20.0, 20.0), 5.0), ((16.0, 30.0, 44.0), 3.0))


def little_block(seed: int = 1) -> np.ndarray:
    """A block of 20 × 48 × 52 voxels in air with two spherical voids: uint16, air 1000, material 9000, noise 400."""
    sampling = 4  # per voxel and axis
    z, y, x = np.meshgrid(
        *(np.arange(n * sampling) / sampling + 0.5 / sampling - 0.5 for n in (32, 64, 64)), indexing="ij", sparse=True
    )
    solid = (np.abs(z - 15.5) < 10) & (np.abs(y - 31.5) < 24) & (np.abs(x - 31.5) < 26)
    for (k, j, i), radius in VOIDS:
        solid = solid & ((z - k) ** 2 + (y - j) ** 2 + (x - i) ** 2 > radius**2)
    share = solid.reshape(32, sampling, 64, sampling, 64, sampling).mean(axis=(1, 3, 5))
    values = 1000 + 8000 * ndimage.gaussian_filter(share, 0.8)
    noise = ndimage.gaussian_filter(np.random.default_rng(seed).normal(size=values.shape), 0.6)
    return np.clip(values + 400 * noise / noise.std(), 0, 65535).astype(np.uint16)


def write_series(folder: Path, stored: np.ndarray, **attributes: object) -> Path:
    """Write one file a slice, names in shuffled order; ``attributes`` replace or (None) delete DICOM attributes."""
    folder.mkdir(parents=True, exist_ok=True)
    order = np.random.default_rng(0).permutation(len(stored))
    for k, pixels in enumerate(stored):
        meta = FileMetaDataset()
        meta.MediaStorageSOPClassUID, meta.TransferSyntaxUID = CTImageStorage, ExplicitVRLittleEndian
        meta.MediaStorageSOPInstanceUID = generate_uid(entropy_srcs=[folder.name, str(k)])
        data = FileDataset("", {}, file_meta=meta, preamble=b"\0" * 128)
        data.SOPClassUID, data.SOPInstanceUID = CTImageStorage, meta.MediaStorageSOPInstanceUID
        data.Modality, data.ImageType = "CT", ["ORIGINAL", "PRIMARY", "AXIAL"]
        data.PatientName, data.PatientID = "Qorvex^Block", "QORVEX-7"
        for name in ("StudyInstanceUID", "SeriesInstanceUID", "FrameOfReferenceUID"):
            setattr(data, name, generate_uid(entropy_srcs=[folder.name, name]))
        data.SeriesDescription, data.InstanceNumber = "qorvex block", k + 1
        data.ImagePositionPatient = [-6.4, -6.4, k * SPACING_MM]
        data.ImageOrientationPatient = [1, 0, 0, 0, 1, 0]
        data.PixelSpacing, data.SliceThickness = [SPACING_MM, SPACING_MM], SPACING_MM
        data.Rows, data.Columns, data.SamplesPerPixel = *pixels.shape, 1
        data.PhotometricInterpretation, data.PixelRepresentation = "MONOCHROME2", 0
        data.BitsAllocated, data.BitsStored, data.HighBit = 16, 16, 15
        data.RescaleSlope, data.RescaleIntercept, data.RescaleType = 1, 0, "US"
        data.PixelData = pixels.astype("<u2").tobytes()
        for name, value in attributes.items():
            if value is None:
                delattr(data, name)
            else:
                setattr(data, name, value(k) if callable(value) else value)
        pydicom.dcmwrite(folder / f"im{order[k]:04d}", data)
    return folder


@pytest.fixture(scope="session")
def block_series(tmp_path_factory) -> Path:
    """Folder with the little block, kind left open by the header."""
    return write_series(tmp_path_factory.mktemp("series") / "block", little_block())


@pytest.fixture(scope="session")
def series_writer() -> Callable[..., Path]:
    return write_series


@pytest.fixture(scope="session")
def block_pixels() -> np.ndarray:
    return little_block()
