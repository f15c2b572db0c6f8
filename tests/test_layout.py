"""The repository keeps its shape."""

import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1]
PACKAGE = ROOT / "inspect" / "tomofolio"


def test_source_root_is_no_package_because_it_would_shadow_the_standard_library():
    assert not (ROOT / "inspect" / "__init__.py").exists()
    assert not list((ROOT / "inspect").glob("*.py"))


def test_standard_inspect_module_is_imported_from_the_repository_root():
    code = "import inspect, numpy; print(inspect.getsourcefile(inspect))"
    found = subprocess.run([sys.executable, "-c", code], cwd=ROOT, capture_output=True, text=True, check=True).stdout
    assert str(ROOT) not in found


#: Rooms from the front door to the back: a room imports only from rooms before it.
ORDER = ["intake", "ranges", "body", "fitness", "measure", "render", "report", "deliver"]


@pytest.mark.parametrize("room", ORDER)
def test_imports_run_downwards_only(room):
    later = [*ORDER[ORDER.index(room) + 1 :], "pipeline", "cli", "listing"]
    for path in (PACKAGE / room).glob("*.py"):
        text = path.read_text(encoding="utf-8")
        for other in later:
            assert f"tomofolio.{other}" not in text, f"{path.name} reaches up to {other}"


@pytest.mark.parametrize(
    ("library", "rooms"), [("pydicom", {"intake", "deliver"}), ("reportlab", {"report"})], ids=["pydicom", "reportlab"]
)
def test_library_is_known_to_its_rooms_only(library, rooms):
    for path in PACKAGE.rglob("*.py"):
        if path.relative_to(PACKAGE).parts[0] in rooms:
            continue
        text = path.read_text(encoding="utf-8")
        assert f"import {library}" not in text and f"from {library}" not in text, path
