"""Writes a drawn scan as losslessly compressed DICOM files, the same bytes each time."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pydicom
from pydicom.dataset import Dataset, FileMetaDataset
from pydicom.uid import CTImageStorage, ExplicitVRLittleEndian, JPEGLSLossless, generate_uid


def write_series(
    folder: Path,
    stored: np.ndarray,
    spacing: tuple[float, float, float],
    origin: tuple[float, float, float],
    facts: dict[str, Any],
    private: dict[tuple[int, int], tuple[str, Any]] | None = None,
) -> None:
    """One file a slice, ``facts`` are DICOM attributes by keyword, ``private`` elements by tag with their VR."""
    folder.mkdir(parents=True, exist_ok=True)
    for old in folder.glob("*.dcm"):
        old.unlink()
    for k, pixels in enumerate(stored):
        data = Dataset()
        data.file_meta = FileMetaDataset()
        data.file_meta.MediaStorageSOPClassUID = CTImageStorage
        data.file_meta.MediaStorageSOPInstanceUID = generate_uid(entropy_srcs=[folder.name, "slice", str(k)])
        data.file_meta.TransferSyntaxUID = ExplicitVRLittleEndian
        data.file_meta.ImplementationVersionName = "DEMO"
        data.SOPClassUID, data.SOPInstanceUID = CTImageStorage, data.file_meta.MediaStorageSOPInstanceUID
        for name in ("StudyInstanceUID", "SeriesInstanceUID", "FrameOfReferenceUID"):
            setattr(data, name, generate_uid(entropy_srcs=[folder.name, name]))
        data.SpecificCharacterSet = "ISO_IR 192"
        data.Modality, data.ImageType = "CT", ["ORIGINAL", "PRIMARY", "AXIAL"]
        data.InstanceNumber, data.SeriesNumber, data.AcquisitionNumber = k + 1, 1, 1
        data.ImagePositionPatient = [origin[0], origin[1], round(origin[2] + k * spacing[0], 6)]
        data.ImageOrientationPatient = [1, 0, 0, 0, 1, 0]
        data.PixelSpacing, data.SliceThickness = [spacing[1], spacing[2]], spacing[0]
        data.Rows, data.Columns = pixels.shape
        data.SamplesPerPixel, data.PhotometricInterpretation = 1, "MONOCHROME2"
        data.BitsAllocated = data.BitsStored = 16
        data.HighBit, data.PixelRepresentation = 15, int(pixels.dtype.kind == "i")
        for name, value in facts.items():
            setattr(data, name, value)
        for tag, (vr, value) in (private or {}).items():
            data.add_new(tag, vr, value)
        data.PixelData = pixels.tobytes()
        data["PixelData"].VR = "OW"
        data.compress(JPEGLSLossless, generate_instance_uid=False)
        pydicom.dcmwrite(folder / f"slice-{k + 1:03d}.dcm", data, enforce_file_format=True)
