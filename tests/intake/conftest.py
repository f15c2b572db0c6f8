"""Invented series for the tests of the intake, written with pydicom as a scanner would write them."""

from pathlib import Path

import numpy as np
import pydicom
import pytest
from pydicom.dataset import Dataset, FileMetaDataset
from pydicom.uid import CTImageStorage, ExplicitVRLittleEndian, generate_uid

SHARED = Path(__file__).resolve().parents[2] / "../shared/data"


def slice_dataset(
    pixels, k=0, *, uid="a", position=None, orientation=(1, 0, 0, 0, 1, 0), spacing=(0.5, 0.4), **elements
):
    """One CT slice. ``elements`` set or (None) delete elements by keyword, after everything else."""
    data = Dataset()
    data.file_meta = FileMetaDataset()
    data.file_meta.TransferSyntaxUID = ExplicitVRLittleEndian
    data.file_meta.MediaStorageSOPClassUID = data.SOPClassUID = CTImageStorage
    instance = generate_uid(entropy_srcs=[uid, str(k)])
    data.file_meta.MediaStorageSOPInstanceUID = data.SOPInstanceUID = instance
    data.SpecificCharacterSet = "ISO_IR 192"
    data.ImageType = ["ORIGINAL", "PRIMARY", "AXIAL"]
    data.Modality = "CT"
    data.SeriesDescription = "Invented series"
    data.PatientName, data.PatientID = "Invented^Item", "ITEM-1"
    data.KVP, data.ConvolutionKernel, data.SliceThickness = "120", "STANDARD", "1.0"
    data.StudyInstanceUID = generate_uid(entropy_srcs=["study"])
    data.SeriesInstanceUID = generate_uid(entropy_srcs=["series", uid])
    data.FrameOfReferenceUID = generate_uid(entropy_srcs=["frame"])
    data.SeriesNumber, data.InstanceNumber = 1, k + 1
    data.ImagePositionPatient = [
        float(f"{x:.8f}") for x in (position if position is not None else (-3.0, -4.0, float(k)))
    ]
    data.ImageOrientationPatient = [float(f"{x:.8f}") for x in orientation]
    data.PixelSpacing = list(spacing)
    data.SamplesPerPixel, data.PhotometricInterpretation = 1, "MONOCHROME2"
    data.Rows, data.Columns = pixels.shape
    data.BitsAllocated = data.BitsStored = 8 * pixels.dtype.itemsize
    data.HighBit = data.BitsStored - 1
    data.PixelRepresentation = int(pixels.dtype.kind == "i")
    data.RescaleSlope, data.RescaleIntercept, data.RescaleType = "1", "0", "HU"
    data.PixelData = pixels.tobytes()
    for keyword, value in elements.items():
        if value is None:
            delattr(data, keyword)
        else:
            setattr(data, keyword, value)
    return data


def save(data, path):
    path.parent.mkdir(parents=True, exist_ok=True)
    data.save_as(path, enforce_file_format=True)
    return path


def write_series(folder, stored, *, positions=None, change=None, **elements):
    """Write slices and return their paths. ``change(k, dataset)`` may alter each slice before it is written."""
    paths = []
    for k, pixels in enumerate(stored):
        data = slice_dataset(pixels, k, position=None if positions is None else positions[k], **elements)
        if change is not None:
            change(k, data)
        paths.append(save(data, Path(folder) / f"{k:03d}.dcm"))
    return paths


def random_stored(seed=0, shape=(5, 6, 7), dtype=np.int16, low=-1000, high=2000):
    return np.random.default_rng(seed).integers(low, high, size=shape).astype(dtype)


@pytest.fixture
def make_slice():
    return slice_dataset


@pytest.fixture
def save_slice():
    return save


@pytest.fixture
def make_series():
    return write_series


@pytest.fixture
def make_stored():
    return random_stored


@pytest.fixture
def head_folder():
    folder = SHARED / "head_tilted_uneven"
    if not folder.is_dir():
        pytest.skip("the real head scan is not beside this repository (../shared/data/head_tilted_uneven)")
    return folder.resolve()


@pytest.fixture
def engine_folder():
    folder = SHARED / "engine_block"
    if not folder.is_dir():
        pytest.skip("the real engine block scan is not beside this repository (../shared/data/engine_block)")
    return folder.resolve()


@pytest.fixture
def pydicom_files():
    return Path(pydicom.__file__).parent / "data" / "test_files"
