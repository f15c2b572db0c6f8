"""Each way that an input can be bad has one clear message: what is wrong, in which file, what to do."""

import logging
import os
import warnings
import zipfile

import numpy as np
import pytest
from pydicom.encaps import encapsulate, get_frame
from pydicom.uid import JPEG2000Lossless, JPEGLossless, JPEGLosslessSV1, JPEGLSLossless, RLELossless

from tomofolio.errors import InputError
from tomofolio.intake import read_series, survey


def refuse(path, match, *, file=None, call=read_series):
    with pytest.raises(InputError, match=match) as caught:
        call(path)
    assert caught.value.remedy
    if file is not None:
        assert caught.value.file == str(file)
    return caught.value


def only_slice(number, **elements):
    def change(k, data):
        if k == number:
            for keyword, value in elements.items():
                if value is None:
                    delattr(data, keyword)
                else:
                    setattr(data, keyword, value)

    return change


def test_no_such_path(tmp_path):
    refuse(tmp_path / "nowhere", "no such file or folder", file=tmp_path / "nowhere")
    refuse(tmp_path / "nowhere", "no such file or folder", call=survey)


def test_empty_folder_and_folder_without_dicom(tmp_path):
    refuse(tmp_path, "no files")
    (tmp_path / "a.txt").write_text("text")
    (tmp_path / "b.bin").write_bytes(bytes(range(256)) * 10)
    refuse(tmp_path, "none of the 2 files is DICOM")
    (tmp_path / "c.zip").write_bytes(b"PK")
    refuse(tmp_path, r"zips in a folder are not opened\. Give the zip itself, such as .*c\.zip")
    refuse(tmp_path / "a.txt", "no DICOM file")


def test_pipe_does_not_block(tmp_path, make_series, make_stored):
    os.mkfifo(tmp_path / "pipe")
    refuse(tmp_path / "pipe", "neither a file nor a folder")
    make_series(tmp_path, make_stored())
    assert read_series(tmp_path)[1].files == 5


def test_no_ct_series(tmp_path, make_series, make_stored):
    make_series(tmp_path, make_stored(), Modality="MR")
    make_series(tmp_path / "b", make_stored(), Modality="PT", uid="b")
    refuse(tmp_path, r"(?s)no report can be made from any of the 2 series.*modality is MR.*modality is PT")


def test_single_slice(tmp_path, make_series, make_stored):
    (path,) = make_series(tmp_path, make_stored(shape=(1, 5, 6)))
    refuse(tmp_path, "single slice", file=path)
    refuse(path, "single slice", file=path)


@pytest.mark.parametrize(
    ("elements", "match"),
    [
        ({"ImagePositionPatient": None}, r"Image Position \(Patient\) is missing"),
        ({"ImagePositionPatient": [0, 0]}, r"Image Position \(Patient\) is missing or broken"),
        ({"ImageOrientationPatient": None}, "Image Orientation is missing"),
        ({"ImageOrientationPatient": [1, 0, 0, 1, 0, 0]}, "differ in Image Orientation"),
        ({"ImageOrientationPatient": [1, 0, 0, 0, 0.999, 0.0447]}, "differ in Image Orientation"),
        ({"PixelSpacing": None}, "Pixel Spacing is missing"),
        ({"PixelSpacing": [0.5, 0.41]}, "differ in Pixel Spacing"),
        ({"RescaleSlope": "0"}, "Rescale Slope is zero"),
        ({"RescaleSlope": None}, "Rescale Slope is recorded in 4 of the 5 slices only"),
        ({"RescaleType": "US"}, r"differ in Rescale Type \(HU and US\)"),
        ({"Rows": 5}, r"differ in matrix \(6 × 7 and 5 × 7\)"),
        ({"PhotometricInterpretation": "MONOCHROME1"}, "differ in photometric interpretation"),
        ({"BitsStored": 12, "HighBit": 11}, "differ in Bits Stored"),
        ({"PixelRepresentation": 0}, "differ in Pixel Representation"),
        ({"PixelData": None}, "no pixel data"),
        ({"PixelData": b"\0" * 60}, "pixel data end early: 60 of 84 bytes"),
        ({"ImageType": ["ORIGINAL", "PRIMARY", "LOCALIZER"]}, "localizer"),
    ],
    ids=lambda value: next(iter(value)) if isinstance(value, dict) else "",
)
def test_one_slice_that_does_not_fit_is_named(tmp_path, make_series, make_stored, elements, match):
    paths = make_series(tmp_path, make_stored(), change=only_slice(3, **elements))
    refuse(tmp_path, match, file=paths[3])
    (entry,) = survey(tmp_path)
    assert not entry.fit


@pytest.mark.parametrize(
    ("elements", "match"),
    [
        ({"PixelSpacing": [0, 0.4]}, "Pixel Spacing is missing or not above zero"),
        ({"PixelSpacing": None}, "Pixel Spacing is missing"),
        ({"ImageOrientationPatient": None}, r"Image Orientation \(Patient\) is missing"),
        ({"ImageOrientationPatient": [1, 0, 0, 0.6, 0.8, 0]}, "not at right angles"),
        ({"ImageOrientationPatient": [2, 0, 0, 0, 1, 0]}, "not made of unit vectors"),
        ({"Rows": 60000, "Columns": 60000}, "60000 × 60000 pixels is declared"),
        ({"Rows": 16000, "Columns": 16000}, "pixel data end early"),
        ({"Rows": 0}, "0 × 7 pixels is declared"),
        ({"BitsAllocated": 64, "BitsStored": 64, "HighBit": 63}, "a form that is not read"),
        ({"HighBit": 12, "BitsStored": 12}, "a form that is not read"),
        ({"SeriesInstanceUID": None}, "Series Instance UID is missing"),
    ],
)
def test_series_that_cannot_be_is_refused_before_memory_is_asked_for(
    tmp_path, make_series, make_stored, elements, match
):
    make_series(tmp_path, make_stored(), **elements)
    refuse(tmp_path, match)


@pytest.mark.parametrize("text", [b"nan ", b"inf ", b"abc "])
def test_slope_that_is_no_finite_number(tmp_path, make_series, make_stored, text):
    paths = make_series(tmp_path, make_stored(), RescaleSlope="1.25")
    for path in paths:
        path.write_bytes(path.read_bytes().replace(b"1.25", text))
    refuse(tmp_path, "Rescale Slope is not a finite number")


def test_volume_beyond_the_machine_is_refused_before_memory_is_asked_for(
    tmp_path, make_series, make_stored, monkeypatch
):
    monkeypatch.setattr("tomofolio.intake.decoding._machine_memory", lambda: 400)
    make_series(tmp_path, make_stored())
    refuse(tmp_path, "more than this machine can hold")


def test_absurd_compressed_image_is_refused_before_memory_is_asked_for(tmp_path, make_series, make_stored):
    def change(k, data):
        data.file_meta.TransferSyntaxUID = JPEG2000Lossless
        data.PixelData = encapsulate([b"\0" * 100])
        data.Rows = data.Columns = 16000

    make_series(tmp_path, make_stored(shape=(3, 2, 2)), change=change)
    refuse(tmp_path, r"16000 × 16000 pixels is declared in \d+ bytes")


def test_file_cut_short(tmp_path, make_series, make_stored):
    paths = make_series(tmp_path, make_stored())
    paths[2].write_bytes(paths[2].read_bytes()[:-20])
    refuse(tmp_path, "pixel data end early: 64 of 84 bytes", file=paths[2])


@pytest.mark.parametrize("syntax", [JPEG2000Lossless, JPEGLSLossless, RLELossless, JPEGLosslessSV1, JPEGLossless])
def test_pixels_that_cannot_be_decoded_say_so_once_and_nothing_else_reaches_the_terminal(
    tmp_path, make_series, make_stored, syntax, capfd
):
    def change(k, data):
        data.file_meta.TransferSyntaxUID = syntax
        data.PixelData = encapsulate([b"\xff\xd8 no codestream at all"])

    make_series(tmp_path, make_stored(), change=change)
    refuse(tmp_path, "pixel data cannot be decoded")
    assert capfd.readouterr() == ("", "")


@pytest.mark.parametrize("syntax", [JPEG2000Lossless, JPEGLSLossless, RLELossless])
def test_codestream_cut_short_is_refused(tmp_path, make_series, make_stored, syntax, capfd):
    def change(k, data):
        data.compress(syntax, generate_instance_uid=False)
        if k == 2:
            frame = get_frame(data.PixelData, 0, number_of_frames=1)
            data.PixelData = encapsulate([frame[: int(0.8 * len(frame))]])

    paths = make_series(tmp_path, make_stored(shape=(5, 32, 33)), change=change)
    refuse(tmp_path, "pixel data cannot be decoded", file=paths[2])
    assert capfd.readouterr() == ("", "")


def test_compression_without_decoder(tmp_path, make_series, make_stored, monkeypatch):
    def change(k, data):
        data.file_meta.TransferSyntaxUID = JPEGLossless
        data.PixelData = encapsulate([b"\0\0"])

    monkeypatch.setattr("tomofolio.intake.checking.can_decode", lambda syntax: False)
    make_series(tmp_path, make_stored(), change=change)
    refuse(tmp_path, r"cannot be decoded here \(JPEG Lossless")


def test_damaged_file_beside_the_slices_is_refused_and_elsewhere_is_a_caution(tmp_path, make_series, make_stored):
    paths = make_series(tmp_path / "scan", make_stored())
    broken = paths[0].read_bytes()[:132] + b"\xff" * 30
    (tmp_path / "other").mkdir()
    (tmp_path / "other" / "broken.dcm").write_bytes(broken)
    refuse(tmp_path / "other" / "broken.dcm", "damaged")
    _, series = read_series(tmp_path)
    assert any(remark.code == "files-damaged" for remark in series.remarks)
    (tmp_path / "scan" / "broken.dcm").write_bytes(broken)
    refuse(tmp_path, "beside the slices is damaged", file=tmp_path / "scan" / "broken.dcm")


def test_zip_that_is_broken_locked_or_a_bomb(tmp_path):
    (tmp_path / "broken.zip").write_bytes(b"PK\3\4 and no more")
    refuse(tmp_path / "broken.zip", "the zip cannot be read")
    with zipfile.ZipFile(tmp_path / "locked.zip", "w") as archive:
        archive.writestr("a.dcm", "x" * 200)
    data = bytearray((tmp_path / "locked.zip").read_bytes())
    data[6] |= 1
    data[data.index(b"PK\1\2") + 8] |= 1
    (tmp_path / "locked.zip").write_bytes(data)
    refuse(tmp_path / "locked.zip", "locked with a password")
    with zipfile.ZipFile(tmp_path / "bomb.zip", "w", zipfile.ZIP_DEFLATED) as archive:
        archive.writestr("a.dcm", bytes(1 << 20))
    data = bytearray((tmp_path / "bomb.zip").read_bytes())
    at = data.index(b"PK\1\2") + 24  # the size that the table of contents declares
    data[at : at + 4] = (2 << 30).to_bytes(4, "little")
    (tmp_path / "bomb.zip").write_bytes(data)
    refuse(tmp_path / "bomb.zip", "absurd size")


def test_nothing_reaches_the_terminal_and_settings_are_as_before(tmp_path, make_series, make_stored, capfd):
    def change(k, data):
        data.PixelData = data.PixelData + b"\0" * 10  # too long: pydicom warns

    make_series(tmp_path, make_stored(), change=change)
    handlers = logging.getLogger("pydicom").handlers[:]
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        volume, _ = read_series(tmp_path)
    assert volume.shape == (5, 6, 7) and np.isfinite(volume.values(0)).all()
    assert capfd.readouterr() == ("", "")
    assert logging.getLogger("pydicom").handlers == handlers
