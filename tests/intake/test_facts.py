"""Header facts: how the scan was made apart from what could name somebody."""

import pytest

from tomofolio.intake import read_series


@pytest.fixture
def series(tmp_path, make_series, make_stored):
    def change(k, data):
        data.XRayTubeCurrent = str(100 + 10 * k)

    make_series(
        tmp_path,
        make_stored(),
        change=change,
        PatientName="Müller^Änne=미^라",
        PatientBirthDate="19700102",
        InstitutionName="Invented Hospital",
        ReferringPhysicianName="Nobody^Knows",
        StudyDate="20200304",
        AccessionNumber="ACC-7",
        StudyDescription="Knee",
        Manufacturer="Invented Scanners",
        CTDIvol=12.5,
        WindowCenter=["40", "500"],
        WindowWidth=["400", "2000"],
        LossyImageCompression="01",
        LossyImageCompressionRatio="8",
        LossyImageCompressionMethod="ISO_15444_1",
        PatientPosition="FFS",
        PhotometricInterpretation="MONOCHROME1",
    )
    return read_series(tmp_path)[1]


def test_what_could_name_somebody_is_identity_and_nothing_else(series):
    secrets = (
        "Müller",
        "미 라",
        "1970-01-02",
        "Invented Hospital",
        "Nobody Knows",
        "2020-03-04",
        "ACC-7",
        "Knee",
        "ITEM-1",
    )
    for secret in secrets:
        assert any(secret in value for value in series.identity.values()), secret
        assert not any(secret in value for value in series.acquisition.values()), secret
        assert not any(secret in remark.text for remark in series.remarks), secret
    assert series.identity["Series description"] == series.description == "Invented series"


def test_acquisition_is_text_with_units_and_spans(series):
    assert series.acquisition["Tube voltage"] == "120 kV"
    assert series.acquisition["Tube current"] == "100 to 140 mA"
    assert series.acquisition["Slice thickness"] == "1 mm"
    assert series.acquisition["CTDIvol"] == "12.5 mGy"
    assert series.acquisition["Lossy compression"] == "yes, ISO_15444_1, ratio 8 : 1"
    assert list(series.acquisition)[:2] == ["Manufacturer", "Tube voltage"]


def test_lossy_compression_is_a_caution(series):
    assert any(remark.code == "lossy-compression" and remark.severity == "caution" for remark in series.remarks)


def test_display_facts_are_kept(series):
    assert series.window == (40.0, 400.0)
    assert series.inverted_display
    assert series.patient_position == "FFS"
    assert series.slice_thickness_mm == 1.0
    assert series.files == 5


def test_control_characters_never_reach_a_text(tmp_path, make_series, make_stored):
    odd = {"ConvolutionKernel": "A\x07\x1b[31mB", "RescaleType": "X\x01Y", "Manufacturer": "M\nN"}
    make_series(tmp_path, make_stored(), **odd)
    volume, series = read_series(tmp_path)
    assert series.acquisition["Kernel"] == "A  [31mB"
    assert volume.unit.symbol == "X Y"
    assert series.acquisition["Manufacturer"] == "M N"


@pytest.mark.parametrize(
    ("charset", "encoded", "expected"),
    [
        ("ISO_IR 100", "Größe^Åse".encode("latin-1"), "Größe Åse"),
        ("ISO_IR 144", "Люкceмбypг".encode("iso8859-5"), "Люкceмбypг"),
        ("ISO_IR 192", "山田^太郎".encode(), "山田 太郎"),
        ("GB18030", "王^小东".encode("gb18030"), "王 小东"),
    ],
)
def test_names_are_decoded_by_the_specific_character_set(
    tmp_path, make_slice, save_slice, make_stored, charset, encoded, expected
):
    # DICOM PS3.5 Annexes H to K: the encodings behind the defined terms are Python's own codecs here.
    for k, pixels in enumerate(make_stored()):
        data = make_slice(pixels, k, SpecificCharacterSet=charset, PatientName="@" * len(encoded))
        path = save_slice(data, tmp_path / f"{k}")
        path.write_bytes(path.read_bytes().replace(b"@" * len(encoded), encoded))
    assert read_series(tmp_path)[1].identity["Patient name"] == expected
