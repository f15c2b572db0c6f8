"""From a path to one volume and its header facts."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import pydicom
from pydicom.dataset import Dataset

from tomofolio.errors import InputError
from tomofolio.intake.decoding import decode
from tomofolio.intake.elements import code
from tomofolio.intake.facts import acquisition, identity
from tomofolio.intake.gaps import gap_remarks
from tomofolio.intake.headers import Header
from tomofolio.intake.quiet import quiet_pydicom
from tomofolio.intake.recommending import is_original
from tomofolio.intake.surveying import Fraction, SeriesSummary, Survey, look_through, unit_and_kind
from tomofolio.intake.units import rescale_of
from tomofolio.remarks import Remark, Severity
from tomofolio.series import Series
from tomofolio.volume import Kind, Unit, Volume

#: Share of the progress that reading the headers takes.
HEADERS_SHARE = 0.5


def read_series(path: Path, uid: str | None = None, *, progress: Fraction | None = None) -> tuple[Volume, Series]:
    """Read one series.

    Parameters
    ----------
    path : a folder of any depth, a file, a zip (read in place) or a DICOMDIR.
    uid : the series, by a beginning of its UID that no other series shares; None for the one that is recommended.
    progress : called with 0 … 1.

    Returns
    -------
    The volume (slices sorted along their normal, stored numbers as decoded) and its header facts.

    Raises
    ------
    InputError : nothing usable is there, the choice is not clear, or the series cannot be used.
    """
    shown = progress or (lambda fraction: None)
    with quiet_pydicom() as said:
        found = look_through(Path(path), lambda fraction: shown(HEADERS_SHARE * fraction))
        chosen = choose(found.series, uid, Path(path))
        if chosen.arrangement is None:
            raise chosen.refusal or InputError("the series cannot be used", file=path)
        before = len(said)
        headers = chosen.headers
        stored, no_data = decode(headers, lambda fraction: shown(HEADERS_SHARE + (1 - HEADERS_SHARE) * fraction))
        decoders_said = said[before:]
        slope, intercept = rescale_of(headers)
        unit, kind, why = unit_and_kind(headers)
        volume = Volume(stored, slope, intercept, chosen.arrangement.grid, unit, no_data)
        middle = headers[len(headers) // 2]
        full = _full_header(middle)
        thickness = {header.thickness_mm for header in headers}
        remarks = [
            *gap_remarks(volume.grid, thickness.pop() if len(thickness) == 1 else None),
            *_value_remarks(unit, headers, kind),
            *_file_remarks(found, decoders_said),
        ]
        series = Series(
            uid=chosen.uid,
            description=chosen.description,
            modality=chosen.modality,
            sop_class=chosen.sop_class,
            kind=kind,
            kind_reason=why,
            patient_position=code(full, 0x00185100),
            slice_thickness_mm=middle.thickness_mm,
            window=middle.window,
            inverted_display=middle.pixels.photometric == "MONOCHROME1",
            identity=identity(full, kind),
            acquisition=acquisition(full, headers),
            files=len({header.source for header in headers}),
            remarks=tuple(remarks),
        )
    return volume, series


def choose(found: Sequence[SeriesSummary], uid: str | None, path: Path) -> SeriesSummary:
    """The series asked for, or the recommended one.

    Raises
    ------
    InputError : no or several series begin with ``uid``; none is recommended; none can be used.
    """
    if uid is not None:
        return _by_uid(found, uid, path)
    recommended = [item for item in found if item.recommended]
    if recommended:
        return recommended[0]
    usable = [item for item in found if item.fit]
    if usable:
        reason = next((text for item in usable for text in item.reasons if text.startswith("Not recommended: ")), "")
        problem = reason.removeprefix("Not recommended: ").rstrip(".") or "several series compete"
        raise InputError(problem, file=path, remedy=f"Name one with --series:\n{_choices(usable)}")
    if len(found) == 1 and found[0].refusal is not None:
        raise found[0].refusal
    raise InputError(
        f"no report can be made from any of the {len(found)} series",
        file=path,
        remedy=f"Give the folder that holds a series of CT slices. Here there are:\n{_choices(found)}",
    )


def _by_uid(found: Sequence[SeriesSummary], uid: str, path: Path) -> SeriesSummary:
    matching = [item for item in found if item.uid == uid] or [item for item in found if item.uid.startswith(uid)]
    if not matching or not uid:
        raise InputError(
            f"no series has a UID that begins with {uid!r}",
            file=path,
            remedy=f"Name one of these with --series:\n{_choices(found)}",
        )
    if len({item.uid for item in matching}) > 1:
        raise InputError(
            f"{len(matching)} series have a UID that begins with {uid!r}",
            file=path,
            remedy=f"Give more of the UID:\n{_choices(matching)}",
        )
    return matching[0]


def _choices(series: Sequence[SeriesSummary]) -> str:
    lines = []
    for item in series:
        size = " × ".join(str(n) for n in item.shape) if item.shape else "no images"
        described = f", “{item.description}”" if item.description else ""
        reason = f": {item.refusal.problem}" if item.refusal is not None else ""
        lines.append(f"  {item.uid} ({item.modality or 'no modality'}, {size}{described}){reason}")
    return "\n".join(lines)


def _full_header(header: Header) -> Dataset:
    try:
        with header.source.open() as stream:
            return pydicom.dcmread(stream, stop_before_pixels=True, force=True)
    except OSError as error:
        raise InputError("the file can no longer be read", file=header.source.label, remedy="Try again") from error


def _value_remarks(unit: Unit, headers: Sequence[Header], kind: Kind) -> list[Remark]:
    remarks = []
    if unit.quantity == "grey value":
        text = "The values have no unit: they are grey values, and differ from scanner to scanner."
        remarks.append(Remark("values-without-unit", Severity.CAUTION, text))
    elif unit.quantity == "other":
        text = f"The values are of the declared type {unit.symbol}, not CT numbers."
        remarks.append(Remark("values-of-another-type", Severity.NOTE, text))
    elif unit.basis.value == "implied":
        text = "No Rescale Type is recorded; the standard implies CT numbers (HU) for original CT images."
        remarks.append(Remark("unit-implied", Severity.NOTE, text))
    if any(header.lossy for header in headers):
        text = "The images were compressed with loss at some time: values, edges and small details may have changed."
        remarks.append(Remark("lossy-compression", Severity.CAUTION, text))
    if not all(is_original(header) for header in headers):
        text = "The images are derived (reformatted or processed), not as reconstructed by the scanner."
        remarks.append(Remark("images-derived", Severity.CAUTION, text))
    if len({header.slope for header in headers}) > 1 or len({header.intercept for header in headers}) > 1:
        text = "The rescale differs from slice to slice; each slice is read with its own."
        remarks.append(Remark("rescale-varies", Severity.NOTE, text))
    for name, get in VARYING.items():
        values = {get(header) for header in headers}
        if len(values) > 1:
            severity = Severity.NOTE if name == "image type" else Severity.CAUTION
            remarks.append(Remark(f"{name.replace(' ', '-')}-varies", severity, f"The {name} differs between slices."))
    return remarks


#: What should be the same in all slices for their values to be comparable.
VARYING = {
    "tube voltage": lambda header: header.kvp,
    "kernel": lambda header: header.kernel,
    "slice thickness": lambda header: header.thickness_mm,
    "image type": lambda header: header.image_type,
}


def _file_remarks(found: Survey, said: Sequence[str]) -> list[Remark]:
    """Files that were left out, and what the decoders said. File names may name somebody: they are only counted."""
    remarks = []
    if found.damaged:
        was = "was" if len(found.damaged) == 1 else "were"
        text = f"{_files(len(found.damaged))} elsewhere below the path could not be read and {was} left out."
        remarks.append(Remark("files-damaged", Severity.CAUTION, text))
    if found.missing:
        text = f"The DICOMDIR lists {_files(found.missing)} that {'is' if found.missing == 1 else 'are'} not there."
        remarks.append(Remark("files-missing", Severity.CAUTION, text))
    for line in sorted({" ".join(line.split()) for line in said})[:3]:
        remarks.append(Remark("decoder-warning", Severity.NOTE, f"While decoding the pixels: {line.rstrip('.')}."))
    return remarks


def _files(count: int) -> str:
    return "One file" if count == 1 else f"{count} files"
