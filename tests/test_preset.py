"""Presets come with the tool, are checked, and say what is allowed."""

import pytest

from tomofolio.errors import CallError
from tomofolio.preset import PAGES, load_preset, preset_folder, preset_names


def test_the_three_presets_of_the_interface_are_there():
    assert {"casting", "case-note", "specimen"} <= set(preset_names())


@pytest.mark.parametrize("name", preset_names())
def test_every_preset_that_comes_with_the_tool_is_valid(name):
    preset = load_preset(name)
    assert preset.name == name
    assert set(preset.pages) <= set(PAGES)


def test_case_notes_have_no_voids():
    assert not load_preset("case-note").measure_voids
    assert "voids" not in load_preset("case-note").pages


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (('page_size = "A4"', 'page_size = "B5"'), "Allowed: A4, Letter"),
        (("measure_voids = true", "measure_voids = 1"), "true or false"),
        (('"summary", ', ""), "lacks 'summary'"),
        (("title", "tittle"), "unknown key 'tittle'"),
        (('pages = ["summary"', 'pages = ["sumary"'), "Allowed: summary"),
        (("title =", "title ="), None),
    ],
)
def test_a_preset_of_the_users_own_is_checked_and_the_message_says_what_is_allowed(tmp_path, change, message):
    text = (preset_folder() / "casting.toml").read_text(encoding="utf-8").replace(*change)
    path = tmp_path / "mine.toml"
    path.write_text(text, encoding="utf-8")
    if message is None:
        assert load_preset(str(path)).name == "mine"
        return
    with pytest.raises(CallError) as caught:
        load_preset(str(path))
    assert message in str(caught.value) and str(path) in str(caught.value)


def test_an_unknown_name_lists_the_known_ones():
    with pytest.raises(CallError, match="casting"):
        load_preset("castings")
