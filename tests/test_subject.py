"""Patient or component: job sheet, then header, then preset; in doubt a patient."""

import pytest

from tomofolio.job import Job
from tomofolio.preset import load_preset
from tomofolio.series import Series
from tomofolio.subject import decide_subject
from tomofolio.volume import Kind


def series(kind):
    return Series(
        uid="1.2.3", description="", modality="CT", sop_class="CT Image Storage", kind=kind, kind_reason="As recorded."
    )


@pytest.mark.parametrize(
    ("header", "sheet", "preset", "kind", "chosen", "voids", "keeps"),
    [
        (Kind.COMPONENT, None, None, Kind.COMPONENT, "casting", True, True),
        (Kind.PATIENT, None, None, Kind.PATIENT, "case-note", False, False),
        (Kind.UNKNOWN, None, None, Kind.PATIENT, "case-note", False, False),
        (Kind.UNKNOWN, None, "casting", Kind.COMPONENT, "casting", True, False),
        (Kind.PATIENT, None, "casting", Kind.PATIENT, "casting", False, False),
        (Kind.PATIENT, Kind.COMPONENT, "casting", Kind.COMPONENT, "casting", True, True),
        (Kind.COMPONENT, Kind.PATIENT, None, Kind.PATIENT, "case-note", False, False),
        (Kind.COMPONENT, None, "case-note", Kind.COMPONENT, "case-note", False, True),
        (Kind.UNKNOWN, None, "specimen", Kind.PATIENT, "specimen", False, False),
    ],
)
def test_subject_is_decided_in_order(header, sheet, preset, kind, chosen, voids, keeps):
    subject = decide_subject(series(header), Job(kind=sheet), load_preset(preset) if preset else None, None)
    assert (subject.kind, subject.preset.name) == (kind, chosen)
    assert (subject.measure_voids, subject.keep_identity) == (voids, keeps)


@pytest.mark.parametrize("asked", [True, False])
@pytest.mark.parametrize("kind", list(Kind))
def test_identity_follows_the_call_where_the_call_says_so(kind, asked):
    assert decide_subject(series(kind), Job(), None, asked).keep_identity is asked


def test_a_patients_scan_with_a_void_preset_says_why_there_are_no_voids():
    subject = decide_subject(series(Kind.UNKNOWN), Job(), load_preset("specimen"), None)
    assert [remark.code for remark in subject.remarks] == ["voids-not-for-patients"]
