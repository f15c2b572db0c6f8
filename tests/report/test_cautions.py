"""The cautions in the report and SAFETY.md are one text."""

from pathlib import Path

from tomofolio.report.cautions import cautions, cautions_text

ROOT = Path(__file__).resolve().parents[2]


def test_safety_file_and_cautions_of_the_report_are_the_same_text():
    assert (ROOT / "SAFETY.md").read_text(encoding="utf-8") == cautions_text()


def test_every_line_of_the_text_reaches_the_report():
    words = [w for w in cautions_text().split() if w not in ("#", "##", "-")]
    title = cautions_text().splitlines()[0].split()[1:]
    printed = " ".join(f"{c.title} {' '.join(c.points)}" for c in cautions()).split()
    assert title + printed == words


def test_cautions_deny_diagnosis_acceptance_implants_and_treatment():
    text = cautions_text()
    for wanted in ("medical device", "diagnosis", "neither accepts nor rejects", "implant", "treatment"):
        assert wanted in text
    for wanted in (
        "Partial volume",
        "Beam hardening",
        "Resolution",
        "threshold",
        "scale",
        "Local codes",
        "health data",
    ):
        assert wanted in text
