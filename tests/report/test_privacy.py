"""Free texts lose whatever repeats an identifying fact while identity is hidden."""

from __future__ import annotations

import pytest

from tomofolio.report.privacy import WITHHELD, Discretion
from tomofolio.series import Series
from tomofolio.volume import Kind


def discretion(keep: bool = False, **identity: str) -> Discretion:
    series = Series("1.2.3.4.5", "drawer nine", "CT", "", Kind.PATIENT, "", identity=identity)
    return Discretion(series, keep)


@pytest.mark.parametrize(
    "text",
    ["Quorvane", "for ILSE QUORVANE", "Quorvane^Ilse", "quorvane, born", "uid 1.2.3.4.5", "from Drawer Nine"],
)
def test_names_in_any_order_and_case_are_blanked(text):
    shown = discretion(**{"Patient name": "Quorvane^Ilse"}).shown(text)
    assert WITHHELD in shown
    assert "quorvane" not in shown.lower() and "drawer" not in shown.lower() and "1.2.3" not in shown


def test_words_that_merely_contain_a_name_stay():
    assert discretion(**{"Patient name": "Rend^Voida"}).shown("rendered voids") == "rendered voids"


def test_short_facts_and_placeholders_name_nobody():
    hidden = discretion(Sex="M", Age="047Y"[:3], **{"Patient name": "removed"})
    assert hidden.shown("M 047 the identity was removed") == "M 047 the identity was removed"


def test_everything_stays_where_identity_is_kept():
    assert discretion(keep=True, **{"Patient name": "Quorvane"}).shown("Quorvane") == "Quorvane"
    assert discretion(**{"Patient name": "Quorvane"}).identity() == {}
