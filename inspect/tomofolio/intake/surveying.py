"""The list of series below a path: what is there, what a report can be made from, and why not."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path

from pydicom.uid import UID

from tomofolio.errors import InputError
from tomofolio.intake.checking import check_slices
from tomofolio.intake.finding import find_sources
from tomofolio.intake.gaps import missing_slices
from tomofolio.intake.geometry import Arrangement
from tomofolio.intake.grouping import Group, group
from tomofolio.intake.headers import DamagedError, Header, read_headers
from tomofolio.intake.kind import decide_kind
from tomofolio.intake.quiet import quiet_pydicom
from tomofolio.intake.recommending import Candidate, is_original, recommend
from tomofolio.intake.sources import Source
from tomofolio.intake.units import decide_unit, implies_hu
from tomofolio.volume import Kind, Unit

Fraction = Callable[[float], None]


@dataclass(frozen=True)
class SeriesSummary:
    """One series as the survey lists it. ``shape``, ``spacing_mm`` and ``unit`` are None where they mean nothing.

    ``headers`` (in slice order where fit) and ``arrangement`` (None where unfit) are what reading the series needs;
    ``refusal`` is why it cannot be read (None where fit).
    """

    uid: str
    description: str
    modality: str
    sop_class: str
    slices: int
    shape: tuple[int, int, int] | None
    spacing_mm: tuple[float, float, float] | None
    unit: str | None
    fit: bool
    recommended: bool
    reasons: tuple[str, ...]
    headers: tuple[Header, ...] = field(default=(), repr=False, compare=False)
    arrangement: Arrangement | None = field(default=None, repr=False, compare=False)
    refusal: InputError | None = field(default=None, repr=False, compare=False)


@dataclass(frozen=True)
class Damaged:
    """A file that is, or may be, a DICOM object and cannot be read."""

    source: Source
    reason: str


@dataclass(frozen=True)
class Survey:
    """Everything found below a path. ``missing`` counts files that a DICOMDIR lists and that are not there."""

    series: tuple[SeriesSummary, ...]
    damaged: tuple[Damaged, ...]
    missing: int


def survey(path: Path, *, progress: Fraction | None = None) -> list[SeriesSummary]:
    """List every image series below a path.

    Parameters
    ----------
    path : a folder of any depth, a file, a zip (read in place) or a DICOMDIR.
    progress : called with 0 … 1.

    Returns
    -------
    All series, the usable ones first; at most one is recommended, see `recommending.recommend`.

    Raises
    ------
    InputError : there is no such path, it cannot be opened, or nothing below it is DICOM.
    """
    with quiet_pydicom():
        return list(look_through(Path(path), progress or _ignore).series)


def look_through(path: Path, progress: Fraction) -> Survey:
    """As `survey`, with what could not be read.

    Raises
    ------
    InputError : see `survey`.
    """
    found = find_sources(path)
    headers: list[Header] = []
    damaged: list[Damaged] = []
    for count, source in enumerate(found.sources, start=1):
        try:
            headers += read_headers(source)
        except DamagedError as error:
            damaged.append(Damaged(source, str(error)))
        progress(count / len(found.sources))
    if not headers:
        raise _nothing_found(path, found.sources, damaged)
    places = {item.source.folder for item in damaged}
    summaries = [_summarise(one, damaged, places) for one in group(headers)]
    return Survey(tuple(_with_recommendation(summaries)), tuple(damaged), found.missing)


def _ignore(fraction: float) -> None:
    return None


def _nothing_found(path: Path, sources: Sequence[Source], damaged: Sequence[Damaged]) -> InputError:
    looked_at = len(sources)
    if damaged:
        first = damaged[0]
        more = f", and {len(damaged) - 1} more like it" if len(damaged) > 1 else ""
        return InputError(
            f"the file is damaged or cannot be read ({first.reason}){more}; no other DICOM file was found",
            file=first.source.label,
            remedy="Copy the files again from where they came from",
        )
    if not looked_at:
        return InputError("there are no files in it", file=path, remedy="Give the folder that holds the DICOM files")
    packed = [source for source in sources if source.label.lower().endswith(".zip")]
    if packed and not path.is_file():
        problem = f"none of the {len(sources)} files is DICOM; zips in a folder are not opened"
        return InputError(problem, file=path, remedy=f"Give the zip itself, such as {packed[0].label}")
    what = "this is no DICOM file" if path.is_file() and looked_at == 1 else f"none of the {looked_at} files is DICOM"
    return InputError(what, file=path, remedy="Give the folder, zip or DICOMDIR that holds the CT slices")


def _summarise(one: Group, damaged: Sequence[Damaged], damaged_places: set[str]) -> SeriesSummary:
    headers = one.headers
    first = headers[0]
    arrangement, refusal = None, None
    try:
        if one.conflict:
            raise InputError(one.conflict, file=first.source.label, remedy="Take the files of one scan")
        _refuse_damaged_neighbour(headers, damaged, damaged_places)
        arrangement = check_slices(headers)
        headers = tuple(headers[k] for k in arrangement.order)
        first = headers[0]
    except InputError as error:
        refusal = error
    pixels = first.pixels
    has_images = pixels.rows > 0 and pixels.columns > 0
    spacing = first.pixel_spacing_mm
    if arrangement is not None:
        spacing_mm: tuple[float, float, float] | None = arrangement.grid.spacing_mm
    elif has_images and len(headers) == 1 and first.thickness_mm and spacing and len(spacing) == 2 and min(spacing) > 0:
        spacing_mm = (first.thickness_mm, spacing[0], spacing[1])
    else:
        spacing_mm = None
    frames = pixels.frames if len(headers) == 1 else len(headers)
    return SeriesSummary(
        uid=first.series,
        description=first.description,
        modality=first.modality,
        sop_class=UID(first.sop_class).name if first.sop_class else "",
        slices=frames if has_images else 0,
        shape=(frames, pixels.rows, pixels.columns) if has_images else None,
        spacing_mm=spacing_mm,
        unit=unit_and_kind(headers)[0].symbol if first.modality == "CT" and has_images else None,
        fit=refusal is None,
        recommended=False,
        reasons=_reasons(headers, arrangement, refusal),
        headers=headers,
        arrangement=arrangement,
        refusal=refusal,
    )


def _refuse_damaged_neighbour(headers: Sequence[Header], damaged: Sequence[Damaged], places: set[str]) -> None:
    """A damaged file beside the slices may be one of them: a volume without it would look whole."""
    folders = {header.source.folder for header in headers} & places
    if not folders:
        return
    first = next(item for item in damaged if item.source.folder in folders)
    raise InputError(
        f"a file beside the slices is damaged or cannot be read ({first.reason}), and may be one of them",
        file=first.source.label,
        remedy="Copy it again, or take it out of the folder if it does not belong to the series",
    )


def unit_and_kind(headers: Sequence[Header]) -> tuple[Unit, Kind, str]:
    """Unit, kind and the reason for the kind, from all headers of a series."""
    declared = headers[0].rescale_type.upper()
    calibrated = declared == "HU" or (not declared and all(implies_hu(header) for header in headers))
    kind, why = decide_kind((header.evidence for header in headers), calibrated=calibrated)
    return decide_unit(headers, kind), kind, why


def _reasons(headers: Sequence[Header], arrangement: Arrangement | None, refusal: InputError | None) -> tuple[str, ...]:
    if refusal is not None:
        return (_sentence(refusal.problem),)
    reasons = []
    if not is_original(headers[0]):
        reasons.append("The images are derived, not original ones.")
    if arrangement is not None:
        count = sum(n for _, n in missing_slices(arrangement.grid))
        if count:
            reasons.append(f"{count} {'slice seems' if count == 1 else 'slices seem'} to be missing.")
        elif not arrangement.grid.is_even:
            reasons.append("The slice gaps are uneven; the true positions are used.")
    return tuple(reasons)


def _with_recommendation(summaries: list[SeriesSummary]) -> list[SeriesSummary]:
    ordered = sorted(summaries, key=lambda item: not item.fit)
    candidates = [Candidate(item.headers, item.arrangement.grid) for item in ordered if item.arrangement is not None]
    chosen, why = recommend(candidates)
    result = []
    for k, item in enumerate(ordered):
        if not item.fit or not why:
            result.append(item)
        elif chosen is None:
            result.append(replace(item, reasons=(*item.reasons, f"Not recommended: {why}.")))
        elif k == chosen:
            result.append(replace(item, recommended=True, reasons=(*item.reasons, f"Recommended: {why}.")))
        else:
            result.append(item)
    return result


def _sentence(clause: str) -> str:
    return clause[:1].upper() + clause[1:].rstrip(".") + "."
