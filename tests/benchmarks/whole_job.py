"""Time and peak memory of the whole job on a 512³ component, as whole processes.

Usage: whole_job.py [--size N] [--runs N] [--keep DIR] [--against SCRIPT]

Draws a part with a bore and 200 voids as an uncompressed series, then runs ``tomofolio report`` once with an empty
kernel cache (first run) and then some more times (later runs). ``--against SCRIPT`` runs another Python script
as ``SCRIPT SERIES_DIR OUT.pdf`` in between, and prints the ratios of the medians.
"""

from __future__ import annotations

import argparse
import os
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
import pydicom
from pydicom.dataset import FileDataset, FileMetaDataset
from pydicom.uid import CTImageStorage, ExplicitVRLittleEndian, generate_uid
from scipy import ndimage


def draw_series(folder: Path, size: int) -> None:
    """Write ``size`` slices of size²: a block with a step and a bore, 200 spherical voids, blur and noise."""
    rng = np.random.default_rng(512)
    spacing = 0.1
    voids = np.column_stack((rng.uniform(0.2, 0.8, size=(200, 3)) * size, rng.uniform(2.0, 9.0, size=200)))
    y, x = np.mgrid[:size, :size].astype(np.float32)
    margin = 8
    for first in range(0, size, 32):
        z0, z1 = max(first - margin, 0), min(first + 32 + margin, size)
        slab = np.zeros((z1 - z0, size, size), np.float32)
        for k in range(z0, z1):
            solid = (np.abs(x - size / 2) < 0.38 * size) & (np.abs(y - size / 2) < 0.34 * size)
            solid &= (0.08 * size < k < 0.92 * size) and ((k < 0.6 * size) | (x < 0.7 * size))
            solid &= (x - 0.3 * size) ** 2 + (y - 0.4 * size) ** 2 > (0.06 * size) ** 2
            slab[k - z0] = solid
            for cz, cy, cx, radius in voids:
                if abs(cz - k) <= radius + 1:
                    j0, i0 = int(cy - radius - 2), int(cx - radius - 2)
                    box = np.s_[j0 : j0 + int(2 * radius) + 5, i0 : i0 + int(2 * radius) + 5]
                    distance = np.sqrt((x[box] - cx) ** 2 + (y[box] - cy) ** 2 + (k - cz) ** 2)
                    slab[k - z0][box] *= np.clip(distance - radius + 0.5, 0, 1)
        slab = ndimage.gaussian_filter(slab, 0.8)
        noise = ndimage.gaussian_filter(rng.normal(size=slab.shape).astype(np.float32), 0.6)
        slab = 2000 + 12000 * slab + 600 * noise / noise.std()
        for k in range(first, min(first + 32, size)):
            _write_slice(folder / f"{k:04d}.dcm", np.clip(slab[k - z0], 0, 32767).astype(np.uint16), k, spacing)


def _write_slice(path: Path, pixels: np.ndarray, k: int, spacing: float) -> None:
    meta = FileMetaDataset()
    meta.MediaStorageSOPClassUID = CTImageStorage
    meta.MediaStorageSOPInstanceUID = generate_uid(entropy_srcs=["whole-job", str(k)])
    meta.TransferSyntaxUID = ExplicitVRLittleEndian
    slice_ = FileDataset(str(path), {}, file_meta=meta, preamble=b"\0" * 128)
    slice_.SOPClassUID, slice_.SOPInstanceUID = CTImageStorage, meta.MediaStorageSOPInstanceUID
    slice_.Modality, slice_.ImageType = "CT", ["ORIGINAL", "PRIMARY", "AXIAL"]
    slice_.PatientName, slice_.PatientID = "Benchmark block", "BLOCK"
    for name in ("StudyInstanceUID", "SeriesInstanceUID", "FrameOfReferenceUID"):
        setattr(slice_, name, generate_uid(entropy_srcs=["whole-job", name]))
    slice_.InstanceNumber = k + 1
    slice_.ImagePositionPatient, slice_.ImageOrientationPatient = [0, 0, k * spacing], [1, 0, 0, 0, 1, 0]
    slice_.PixelSpacing, slice_.SliceThickness = [spacing, spacing], spacing
    slice_.Rows, slice_.Columns, slice_.SamplesPerPixel = *pixels.shape, 1
    slice_.PhotometricInterpretation = "MONOCHROME2"
    slice_.BitsAllocated, slice_.BitsStored, slice_.HighBit, slice_.PixelRepresentation = 16, 16, 15, 0
    slice_.RescaleSlope, slice_.RescaleIntercept, slice_.RescaleType = 1, 0, "US"
    slice_.PixelData = pixels.tobytes()
    pydicom.dcmwrite(path, slice_, enforce_file_format=True)


def run(command: list[str], environment: dict[str, str]) -> tuple[float, float]:
    """Wall seconds and peak GiB of one process (the system's own account of the finished child)."""
    start = time.perf_counter()
    child = subprocess.Popen(command, env=environment, stdout=subprocess.DEVNULL)
    _, status, usage = os.wait4(child.pid, 0)
    if status:
        sys.exit(f"{' '.join(command)} ended with status {status}")
    return time.perf_counter() - start, usage.ru_maxrss / 2**20


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--size", type=int, default=512)
    parser.add_argument("--runs", type=int, default=3)
    parser.add_argument("--keep", type=Path, help="draw the series here and use it again next time")
    parser.add_argument("--against", type=Path, help="a script to compare with")
    options = parser.parse_args()
    with tempfile.TemporaryDirectory() as scratch:
        series = options.keep or Path(scratch) / "series"
        if not series.is_dir():
            series.mkdir(parents=True)
            draw_series(series, options.size)
        out = str(Path(scratch) / "report.pdf")
        environment = {**os.environ, "NUMBA_CACHE_DIR": str(Path(scratch) / "kernels")}
        job = [sys.executable, "-m", "tomofolio", "report", str(series), "--preset", "casting", "--out", out]
        print(f"first run   {'{:7.2f} s  {:5.2f} GiB'.format(*run(job, environment))}", flush=True)
        ours, theirs = [], []
        for _ in range(options.runs):
            ours.append(run(job, environment))
            print(f"later run   {'{:7.2f} s  {:5.2f} GiB'.format(*ours[-1])}", flush=True)
            if options.against:
                theirs.append(run([sys.executable, str(options.against), str(series), out], environment))
                print(f"other       {'{:7.2f} s  {:5.2f} GiB'.format(*theirs[-1])}", flush=True)
        for what, column in (("time", 0), ("memory", 1)):
            mine = statistics.median(row[column] for row in ours)
            line = f"median {what:7s} {mine:7.2f}"
            if theirs:
                other = statistics.median(row[column] for row in theirs)
                line += f"   other {other:7.2f}   ratio {other / mine:.2f}"
            print(line)


if __name__ == "__main__":
    main()
