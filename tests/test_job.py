"""The job sheet is checked key by key."""

import pytest

from tomofolio.errors import CallError
from tomofolio.job import load_job
from tomofolio.volume import Kind


def write(tmp_path, text):
    path = tmp_path / "job.toml"
    path.write_text(text, encoding="utf-8")
    return path


def test_what_the_sheet_says_is_read(tmp_path):
    job = load_job(
        write(
            tmp_path,
            '[subject]\nkind = "component"\nitem = "Pump cover 7"\n[reviewer]\nname = "A. Example"\n'
            '[ranges]\nnames = ["air", "alloy"]\nnamed_by = "A. Example"\n[views]\noblique_direction = [1, 2, -1]\n',
        )
    )
    assert job.kind is Kind.COMPONENT
    assert job.item == "Pump cover 7"
    assert job.range_names == ("air", "alloy")
    assert job.ranges_named_by == job.reviewer_name == "A. Example"
    assert job.oblique_direction == (1.0, 2.0, -1.0)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ('[subjekt]\nkind = "patient"', "unknown section [subjekt]"),
        ('[subject]\nkid = "patient"', "unknown key 'kid' in [subject]"),
        ('[subject]\nkind = "car"', "Allowed: 'patient', 'component'"),
        ("[subject]\nitem = 7", "subject.item must be a text"),
        ("[ranges]\nnames = [1, 2]", "ranges.names must be a list of texts"),
        ("[views]\noblique_direction = [0, 0, 0]", "three numbers"),
        ("[views]\noblique_direction = [1, 2, true]", "three numbers"),
        ("subject = 3", "subject must be a section"),
        ("[subject", "not valid TOML"),
    ],
)
def test_what_is_wrong_is_named_with_its_key(tmp_path, text, message):
    path = write(tmp_path, text)
    with pytest.raises(CallError) as caught:
        load_job(path)
    assert message in str(caught.value) and str(path) in str(caught.value)


def test_a_sheet_that_is_not_there_is_a_wrong_call(tmp_path):
    with pytest.raises(CallError, match="cannot be read"):
        load_job(tmp_path / "none.toml")
