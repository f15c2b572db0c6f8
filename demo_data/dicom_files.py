"""Writes a drawn scan as losslessly compressed DICOM files, the same bytes each time."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pydicom
from pydicom.dataset import Dataset, FileMetaDataset
from pydicom.uid import CTImageStorage, ExplicitVRLittleEndian, JPEGLSLossless, generate_uid

#: Elements of type 2 in the CT image object (DICOM PS3.3, A.3): present, and empty where nothing is known.
EMPTY_UNLESS_GIVEN = (
    "PatientName",
    "PatientID",
    "PatientBirthDate",
    "PatientSex",
    "StudyID",
    "StudyDate",
    "StudyTime",
    "AccessionNumber",
    "ReferringPhysicianName",
    "Laterality",
    "PatientPosition",
    "Manufacturer",
    "PositionReferenceIndicator",
    "KVP",
)


def write_series(
    folder: Path,
    stored: np.ndarray,
    spacing: tuple[float, float, float],
    origin: tuple[float, float, float],
    facts: dict[str, Any],
    *,
    bits: int = 16,
) -> None:
    """Write one file a slice; what was in the folder before goes.

    Parameters
    ----------
    stored : uint16, slices × rows × columns, of which ``bits`` are used.
    spacing : slice, row, column; mm.
    origin : centre of the first voxel, x, y, z in LPS mm.
    facts : values of DICOM attributes by keyword.
    """
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
        height = round(origin[2] + k * spacing[0], 6)
        data.ImagePositionPatient, data.SliceLocation = [origin[0], origin[1], height], height
        data.ImageOrientationPatient = [1, 0, 0, 0, 1, 0]
        data.PixelSpacing, data.SliceThickness = [spacing[1], spacing[2]], spacing[0]
        data.Rows, data.Columns = pixels.shape
        data.SamplesPerPixel, data.PhotometricInterpretation = 1, "MONOCHROME2"
        data.BitsAllocated, data.BitsStored, data.HighBit, data.PixelRepresentation = 16, bits, bits - 1, 0
        for name in EMPTY_UNLESS_GIVEN:
            setattr(data, name, None)
        for name, value in facts.items():
            setattr(data, name, value)
        data.PixelData = pixels.astype("<u2").tobytes()
        data["PixelData"].VR = "OW"
        data.compress(JPEGLSLossless, generate_instance_uid=False)
        pydicom.dcmwrite(folder / f"slice-{k + 1:03d}.dcm", data, enforce_file_format=True)
