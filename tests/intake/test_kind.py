"""Patient, component or unknown, in doubt the safer way."""

import pytest

from tomofolio.intake import read_series
from tomofolio.volume import Kind


def diconde(k, data):
    data.add_new(0x00143073, "LO", "1")  # an element of the DICONDE group


def diconde_creator(k, data):
    data.private_block(0x0015, "DICONDE VENDOR 01", create=True).add_new(1, "LO", "x")


def with_elements(**elements):
    def change(k, data):
        for keyword, value in elements.items():
            setattr(data, keyword, value)

    return change


def both(*changes):
    def change(k, data):
        for one in changes:
            one(k, data)

    return change


@pytest.mark.parametrize(
    ("change", "kind", "word"),
    [
        (None, Kind.UNKNOWN, "neither"),
        (diconde, Kind.COMPONENT, "DICONDE"),
        (diconde_creator, Kind.COMPONENT, "DICONDE"),
        (both(diconde, with_elements(PatientBirthDate="", PatientSex="")), Kind.COMPONENT, "DICONDE"),
        (both(diconde, with_elements(PatientBirthDate="19700101")), Kind.PATIENT, "birth date"),
        (both(diconde, with_elements(PatientSex="F")), Kind.PATIENT, "a sex"),
        (with_elements(PatientBirthDate="19700101"), Kind.PATIENT, "birth date"),
        (with_elements(PatientAge="045Y"), Kind.PATIENT, "an age"),
        (with_elements(PatientWeight="70"), Kind.PATIENT, "weight"),
        (with_elements(PatientIdentityRemoved="YES", RescaleType="US"), Kind.PATIENT, "identity was removed"),
        (with_elements(BodyPartExamined="HEAD"), Kind.PATIENT, "body part"),
        (with_elements(PatientPosition="HFS"), Kind.PATIENT, "patient position"),
        (with_elements(PatientPosition="HFS", RescaleType="US"), Kind.UNKNOWN, "neither"),
        (both(diconde, with_elements(PatientPosition="HFS")), Kind.COMPONENT, "DICONDE"),
    ],
)
def test_kind_follows_the_evidence_and_says_why(tmp_path, make_series, make_stored, change, kind, word):
    make_series(tmp_path, make_stored(), change=change)
    _, series = read_series(tmp_path)
    assert series.kind is kind
    assert word in series.kind_reason and series.kind_reason.endswith(".")


def test_a_birth_date_in_any_slice_counts(tmp_path, make_series, make_stored):
    def change(k, data):
        data.PatientBirthDate = "19700101" if k == 3 else ""

    make_series(tmp_path, make_stored(), change=change)
    assert read_series(tmp_path)[1].kind is Kind.PATIENT
