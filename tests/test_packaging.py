"""The wheel carries what the tool needs and works from any folder."""

from __future__ import annotations

import os
import subprocess
import sys
import zipfile
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1]


@pytest.fixture(scope="module")
def installed(tmp_path_factory) -> Path:
    """A folder with the wheel's content alone, as an installer lays it out."""
    place = tmp_path_factory.mktemp("wheel")
    pip = [sys.executable, "-m", "pip", "--quiet", "--disable-pip-version-check"]
    subprocess.run([*pip, "wheel", "--no-deps", "--wheel-dir", str(place), str(ROOT)], check=True)
    (wheel,) = place.glob("*.whl")
    subprocess.run([*pip, "install", "--no-deps", "--target", str(place / "site"), str(wheel)], check=True)
    return place


def run(code: str, installed: Path, folder: Path) -> str:
    environment = {**os.environ, "PYTHONPATH": str(installed / "site")}
    result = subprocess.run(
        [sys.executable, "-c", code], cwd=folder, env=environment, capture_output=True, encoding="utf-8"
    )
    assert result.returncode == 0, result.stderr
    return result.stdout.strip()


@pytest.mark.slow
def test_wheel_carries_presets_fonts_and_licences_but_no_tests(installed):
    (wheel,) = installed.glob("*.whl")
    names = zipfile.ZipFile(wheel).namelist()
    assert {
        "tomofolio/presets/casting.toml",
        "tomofolio/presets/case-note.toml",
        "tomofolio/presets/specimen.toml",
    } <= set(names)
    assert sum(name.endswith(".ttf") for name in names) >= 2
    assert any(name.endswith("licenses/LICENSE") for name in names)
    assert all(name.startswith(("tomofolio/", "tomofolio-")) for name in names)


@pytest.mark.slow
def test_wheel_finds_its_own_presets_from_any_folder(installed, tmp_path):
    code = "import tomofolio.preset as p; print(p.preset_folder()); print(p.load_preset('casting').title)"
    folder, title = run(code, installed, tmp_path).splitlines()
    assert Path(folder) == installed / "site" / "tomofolio" / "presets"
    assert title


@pytest.mark.slow
def test_wheel_makes_a_report_from_any_folder(installed, block_series, tmp_path):
    code = (
        f"from tomofolio.cli import main; raise SystemExit(main(['report', {str(block_series)!r}, '--out', 'r.pdf']))"
    )
    run(code, installed, tmp_path)
    assert (tmp_path / "r.pdf").read_bytes().startswith(b"%PDF-")
