"""Stored numbers arrive as they were written, whatever the encoding and the number of bits."""

import numpy as np
import pydicom
import pytest
import SimpleITK
from pydicom.uid import (
    DeflatedExplicitVRLittleEndian,
    ExplicitVRBigEndian,
    ImplicitVRLittleEndian,
    JPEG2000Lossless,
    JPEGLSLossless,
    RLELossless,
)

from tomofolio.intake import read_series
from tomofolio.intake.decoding import decode
from tomofolio.intake.headers import read_headers
from tomofolio.intake.sources import FileSource


def change_syntax(syntax):
    def change(k, data):
        if syntax.is_compressed and not syntax.is_deflated:
            data.compress(syntax, generate_instance_uid=False)
            return
        data.file_meta.TransferSyntaxUID = syntax
        if syntax == ExplicitVRBigEndian:
            data.PixelData = np.frombuffer(data.PixelData, "<i2").astype(">i2").tobytes()

    return change


@pytest.mark.parametrize(
    "syntax",
    [
        ImplicitVRLittleEndian,
        DeflatedExplicitVRLittleEndian,
        ExplicitVRBigEndian,
        RLELossless,
        JPEGLSLossless,
        JPEG2000Lossless,
    ],
    ids=lambda uid: uid.keyword,
)
@pytest.mark.filterwarnings("ignore::UserWarning")
def test_every_encoding_gives_the_numbers_that_were_written(tmp_path, make_slice, make_stored, syntax):
    stored = make_stored(seed=3, shape=(4, 32, 40), low=-2000, high=3000)
    change = change_syntax(syntax)
    for k, pixels in enumerate(stored):
        data = make_slice(pixels, k)
        change(k, data)
        implicit, little = syntax.is_implicit_VR, syntax.is_little_endian
        pydicom.dcmwrite(tmp_path / f"{k}.dcm", data, implicit_vr=implicit, little_endian=little)
    volume, series = read_series(tmp_path)
    assert volume.stored.dtype == np.int16
    np.testing.assert_array_equal(volume.stored, stored)
    assert series.acquisition["Transfer syntax"] == syntax.name


@pytest.mark.parametrize("compressor", ["JPEG", "JPEG2000"])
def test_lossless_compression_by_another_writer_gives_the_numbers_that_were_written(
    tmp_path, make_series, make_stored, compressor
):
    # SimpleITK writes JPEG lossless (process 14, selection value 1), the usual one in archives, and JPEG 2000.
    stored = make_stored(seed=4, shape=(4, 24, 32), low=-1024, high=3000)
    make_series(tmp_path / "plain", stored)
    reader, writer = SimpleITK.ImageFileReader(), SimpleITK.ImageFileWriter()
    writer.KeepOriginalImageUIDOn()
    writer.SetUseCompression(True)
    writer.SetCompressor(compressor)
    for path in sorted((tmp_path / "plain").iterdir()):
        reader.SetFileName(str(path))
        reader.LoadPrivateTagsOn()
        image = reader.Execute()
        writer.SetFileName(str(tmp_path / path.name))
        writer.Execute(image)
    for path in (tmp_path / "plain").iterdir():
        path.unlink()
    volume, series = read_series(tmp_path)
    np.testing.assert_array_equal(volume.values(slice(None)), stored)
    assert series.acquisition["Transfer syntax"].startswith(compressor.replace("JPEG2000", "JPEG 2000"))


@pytest.mark.parametrize(
    ("dtype", "low", "high", "expected"),
    [
        (np.uint8, 0, 256, np.int16),
        (np.uint16, 0, 4096, np.int16),
        (np.uint16, 0, 65536, np.uint16),
        (np.int16, -32768, 32768, np.int16),
        (np.int32, -30000, 30000, np.int16),
        (np.int32, -(2**31), 2**31, np.int32),
        (np.uint32, 0, 60000, np.uint16),
    ],
)
def test_numbers_are_kept_in_int16_wherever_they_fit(tmp_path, make_series, make_stored, dtype, low, high, expected):
    stored = make_stored(seed=5, dtype=np.int64, low=low, high=high).astype(dtype)
    make_series(tmp_path, stored)
    volume, _ = read_series(tmp_path)
    assert volume.stored.dtype == expected
    np.testing.assert_array_equal(volume.stored.astype(np.int64), stored.astype(np.int64))


@pytest.mark.parametrize("signed", [False, True])
def test_bits_above_the_stored_ones_are_no_part_of_the_number(tmp_path, make_series, make_stored, signed):
    low, high = (-2048, 2048) if signed else (0, 4096)
    numbers = make_stored(seed=6, low=low, high=high)
    rubbish = make_stored(seed=7, low=0, high=16)
    cells = ((numbers.astype(np.int32) & 0x0FFF) | (rubbish.astype(np.int32) << 12)).astype(np.uint16)
    make_series(tmp_path, cells, BitsStored=12, HighBit=11, PixelRepresentation=int(signed))
    np.testing.assert_array_equal(read_series(tmp_path)[0].stored, numbers)


def test_slices_without_file_meta_information_or_file_ending_are_read(tmp_path, make_slice, make_stored):
    stored = make_stored(shape=(3, 8, 9))
    for k, pixels in enumerate(stored):
        data = make_slice(pixels, k)
        del data.file_meta
        pydicom.dcmwrite(tmp_path / f"slice{k}", data, implicit_vr=k % 2 == 0, little_endian=True)
    np.testing.assert_array_equal(read_series(tmp_path)[0].stored, stored)


def test_rescaled_values_agree_with_simpleitk_slice_by_slice(tmp_path, make_series, make_stored):
    stored = make_stored(seed=8, shape=(4, 9, 11))

    def change(k, data):
        data.RescaleSlope, data.RescaleIntercept = str(1 + 0.25 * k), str(-100.5 * k)

    paths = make_series(tmp_path, stored, change=change)
    volume, series = read_series(tmp_path)
    for k, path in enumerate(paths):
        expected = SimpleITK.GetArrayFromImage(SimpleITK.ReadImage(str(path)))[0]
        np.testing.assert_allclose(volume.values(k), expected, rtol=1e-6)
    assert "rescale-varies" in {remark.code for remark in series.remarks}


def test_single_slice_of_another_maker_decodes_as_simpleitk_and_pydicom_do(pydicom_files):
    # CT_small.dcm comes with pydicom. One slice is no volume, so the inner path is used.
    path = pydicom_files / "CT_small.dcm"
    (header,) = read_headers(FileSource(path))
    stored, _ = decode([header])
    np.testing.assert_array_equal(stored[0], pydicom.dcmread(path).pixel_array)
    values = header.slope * stored[0].astype(float) + header.intercept
    np.testing.assert_array_equal(values, SimpleITK.GetArrayFromImage(SimpleITK.ReadImage(str(path)))[0])


def test_reading_twice_gives_the_same_bytes(tmp_path, make_series, make_stored):
    make_series(tmp_path, make_stored(seed=2, shape=(20, 16, 16)))
    one, other = read_series(tmp_path), read_series(tmp_path)
    assert one[0].stored.tobytes() == other[0].stored.tobytes()
    assert one[1] == other[1]
