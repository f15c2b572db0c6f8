"""Report presets: which pages, views and tables a report has."""

from __future__ import annotations

import tomllib
from dataclasses import dataclass
from importlib.resources import files
from pathlib import Path

from tomofolio.errors import CallError

PAGES = ("summary", "voids", "views", "ranges", "scan", "method", "cautions")
VIEWS = ("directions", "oblique", "sections", "largest-void", "projections")
SUBJECTS = ("component", "patient", "as-recorded")
PAGE_SIZES = ("A4", "Letter")
REQUIRED_PAGES = ("summary", "method", "cautions")  # a report without them could not be read or repeated


@dataclass(frozen=True)
class Preset:
    """One preset file, checked."""

    name: str
    title: str
    subject: str
    measure_voids: bool
    pages: tuple[str, ...]
    views: tuple[str, ...]
    page_size: str


def preset_folder() -> Path:
    """The folder with the presets: inside an installed wheel, else beside the source root of a checkout."""
    packaged = Path(str(files("tomofolio") / "presets"))
    return packaged if packaged.is_dir() else Path(__file__).resolve().parents[2] / "presets"


def preset_names() -> tuple[str, ...]:
    """Names of the presets that come with the tool, in alphabetical order."""
    return tuple(sorted(path.stem for path in preset_folder().glob("*.toml")))


def load_preset(name_or_file: str) -> Preset:
    """Read a preset by name, or from a file of the user's own.

    Raises
    ------
    CallError : no such preset, or a key or value in it that is not known; the message says what is allowed.
    """
    path = preset_folder() / f"{name_or_file}.toml"
    if name_or_file not in preset_names():
        path = Path(name_or_file)
        if path.suffix != ".toml":
            raise CallError(
                f"there is no preset {name_or_file!r}",
                remedy=f"Use one of {', '.join(preset_names())}, or the path of a .toml file",
            )
    try:
        table = tomllib.loads(path.read_text(encoding="utf-8"))
    except OSError as error:
        raise CallError(f"the preset cannot be read ({error.strerror})", file=path) from error
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise CallError(f"the preset is not valid TOML ({error})", file=path) from error
    return _checked(table, path)


def _checked(table: dict[str, object], path: Path) -> Preset:
    known = {"title", "subject", "measure_voids", "pages", "views", "page_size"}
    for key in table:
        if key not in known:
            raise CallError(f"unknown key {key!r}", file=path, remedy=f"Known keys: {', '.join(sorted(known))}")
    for key in sorted(known - {"page_size"}):
        if key not in table:
            raise CallError(f"the key {key!r} is missing", file=path)
    title, voids = table["title"], table["measure_voids"]
    if not isinstance(title, str) or not title.strip():
        raise CallError("title must be a text that is not empty", file=path)
    if not isinstance(voids, bool):
        raise CallError("measure_voids must be true or false", file=path)
    pages = _choices(table["pages"], "pages", PAGES, path)
    for page in REQUIRED_PAGES:
        if page not in pages:
            raise CallError(f"pages lacks {page!r}", file=path, remedy=f"Every report has {', '.join(REQUIRED_PAGES)}")
    return Preset(
        name=path.stem,
        title=title,
        subject=_choice(table["subject"], "subject", SUBJECTS, path),
        measure_voids=voids,
        pages=pages,
        views=_choices(table["views"], "views", VIEWS, path),
        page_size=_choice(table.get("page_size", "A4"), "page_size", PAGE_SIZES, path),
    )


def _choice(value: object, key: str, allowed: tuple[str, ...], path: Path) -> str:
    if value not in allowed:
        raise CallError(f"{key} = {value!r} is not known", file=path, remedy=f"Allowed: {', '.join(allowed)}")
    return str(value)


def _choices(value: object, key: str, allowed: tuple[str, ...], path: Path) -> tuple[str, ...]:
    if not isinstance(value, list):
        raise CallError(f"{key} must be a list", file=path, remedy=f"Allowed entries: {', '.join(allowed)}")
    chosen = tuple(_choice(entry, key, allowed, path) for entry in value)
    if len(set(chosen)) != len(chosen):
        raise CallError(f"{key} names an entry twice", file=path)
    return chosen
