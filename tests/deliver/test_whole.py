"""Outputs appear whole or not at all."""

import os

import pytest

from tomofolio.deliver.whole import check_data_path, check_report_path, written_whole
from tomofolio.errors import OutputError


def names(folder):
    return sorted(path.name for path in folder.rglob("*"))


def test_all_files_appear_together_and_nothing_else_is_left(tmp_path):
    with written_whole(tmp_path / "r.pdf", tmp_path / "data") as (report, data):
        report.write_text("%PDF-")
        (data / "images").mkdir()
        (data / "images" / "a.png").write_text("a")
        (data / "m.json").write_text("{}")
    assert names(tmp_path) == ["a.png", "data", "images", "m.json", "r.pdf"]


def test_a_failure_half_way_leaves_what_was_there_before(tmp_path):
    (tmp_path / "r.pdf").write_text("%PDF-old")
    with pytest.raises(ZeroDivisionError), written_whole(tmp_path / "r.pdf", tmp_path / "data") as (report, data):
        report.write_text("%PDF-new")
        (data / "m.json").write_text("{}")
        raise ZeroDivisionError
    assert (tmp_path / "r.pdf").read_text() == "%PDF-old"
    assert names(tmp_path) == ["r.pdf"]


def test_a_full_disk_is_an_output_error_and_leaves_nothing(tmp_path):
    with pytest.raises(OutputError, match="No space left"), written_whole(tmp_path / "r.pdf", None):
        raise OSError(28, "No space left on device", str(tmp_path / "r.pdf"))
    assert names(tmp_path) == []


def test_a_report_never_replaces_a_file_that_is_no_pdf(tmp_path):
    (tmp_path / "001.dcm").write_bytes(b"\0" * 128 + b"DICM")
    with pytest.raises(OutputError, match="not a PDF"):
        check_report_path(tmp_path / "001.dcm")


def test_a_missing_folder_and_a_folder_as_report_are_refused(tmp_path):
    with pytest.raises(OutputError, match="no such folder"):
        check_report_path(tmp_path / "none" / "r.pdf")
    with pytest.raises(OutputError, match="a folder"):
        check_report_path(tmp_path)


def test_a_file_as_data_folder_is_refused(tmp_path):
    (tmp_path / "data").write_text("x")
    with pytest.raises(OutputError, match="a file"):
        check_data_path(tmp_path / "data")
    with pytest.raises(OutputError, match="cannot be written"):
        check_data_path(tmp_path / "data" / "deeper")


@pytest.mark.skipif(os.geteuid() == 0, reason="root may write everywhere")
def test_a_read_only_folder_is_refused(tmp_path):
    tmp_path.chmod(0o500)
    with pytest.raises(OutputError, match="cannot be written"):
        check_report_path(tmp_path / "r.pdf")
