"""The one function that walks the stages, from files to a finished case, and the one that writes it out."""

from __future__ import annotations

import platform
from collections.abc import Mapping
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, replace
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path

from tomofolio import __version__
from tomofolio.body import find_body
from tomofolio.case import Case, Provenance
from tomofolio.clock import run_time
from tomofolio.deliver import measurements_text, ranges_csv, voids_csv, written_whole
from tomofolio.fingerprint import pixels_sha256
from tomofolio.fitness import assess
from tomofolio.intake import read_series
from tomofolio.job import Job, load_job
from tomofolio.measure import measure
from tomofolio.preset import load_preset
from tomofolio.progress import Progress, Quiet
from tomofolio.ranges import find_ranges
from tomofolio.render import make_tables, standard_views, write_png
from tomofolio.report import write_report
from tomofolio.subject import Subject, decide_subject

#: Libraries whose version can change a figure or a page.
LIBRARIES = (
    "numpy",
    "scipy",
    "numba",
    "scikit-image",
    "connected-components-3d",
    "pydicom",
    "pylibjpeg-openjpeg",
    "pyjpegls",
    "python-gdcm",
    "reportlab",
    "pillow",
)


@dataclass(frozen=True)
class Order:
    """What the user asks for. ``preset`` None lets the scan decide; ``keep_identity`` None lets the subject decide."""

    path: Path
    series: str | None = None
    job: Path | None = None
    preset: str | None = None
    keep_identity: bool | None = None


def make_case(order: Order, progress: Progress | None = None) -> Case:
    """From files to everything that the report and the data files need.

    Raises
    ------
    CallError, InputError : see `tomofolio.errors`.
    """
    progress = progress or Quiet()
    job = load_job(order.job) if order.job else Job()
    preset = load_preset(order.preset) if order.preset else None
    created = run_time()
    volume, series = read_series(order.path, order.series, progress=progress.stage("Reading the slices"))
    subject = decide_subject(series, job, preset, order.keep_identity)
    with ThreadPoolExecutor(max_workers=1) as background:
        fingerprint = background.submit(pixels_sha256, volume)  # hashing needs no kernel and lets go of the lock
        progress.stage("Finding the value ranges")
        ranges = find_ranges(volume, names=job.range_names, named_by=job.ranges_named_by if job.range_names else "")
        progress.stage("Finding the object")
        body = find_body(volume, ranges)
        progress.stage("Judging the scan")
        fitness = assess(volume, ranges, body)
        progress.stage("Measuring")
        findings = measure(volume, ranges, body, fitness, look_for_voids=subject.measure_voids)
        tables = make_tables(ranges, body=body, volume=volume)
        views = standard_views(
            volume,
            ranges,
            body,
            findings,
            tables,
            kind=subject.kind,
            wanted=subject.preset.views,
            oblique_direction=job.oblique_direction,
            progress=progress.stage("Casting rays"),
        )
        sha256 = fingerprint.result()
    return Case(
        job=job,
        preset=subject.preset,
        kind=subject.kind,
        keep_identity=subject.keep_identity,
        series=replace(series, remarks=series.remarks + subject.remarks),
        volume=volume,
        ranges=ranges,
        body=body,
        fitness=fitness,
        findings=findings,
        tables=tables,
        views=views,
        provenance=Provenance(
            tool_version=__version__,
            parameters=_parameters(order, subject),
            libraries=library_versions(),
            created=created,
            pixels_sha256=sha256,
        ),
    )


def write_case(case: Case, report: Path, data: Path | None, progress: Progress | None = None) -> None:
    """Write the report, and the data files where asked for: all of them or none.

    Raises
    ------
    OutputError : something could not be written.
    """
    progress = progress or Quiet()
    with written_whole(report, data) as (report_place, data_place):
        progress.stage("Setting the report")
        write_report(case, report_place)
        if data_place is not None:
            shown = progress.stage("Writing the data files")
            (data_place / "measurements.json").write_text(measurements_text(case), encoding="utf-8")
            (data_place / "voids.csv").write_text(voids_csv(case), encoding="utf-8", newline="")
            (data_place / "ranges.csv").write_text(ranges_csv(case), encoding="utf-8", newline="")
            images = data_place / "images"
            images.mkdir()
            for count, view in enumerate(case.views, start=1):
                write_png(view, images / f"{view.id}.png")
                shown(count / len(case.views))


def default_report_name(case: Case) -> str:
    """A name from the series: the short hash, with the series description where identity may be shown."""
    words = "".join(c if c.isalnum() else "-" for c in case.series.description.lower()) if case.keep_identity else ""
    name = "-".join(part for part in words.split("-") if part)[:40]
    return f"tomofolio-{name + '-' if name else ''}{case.provenance.pixels_sha256[:12]}.pdf"


def library_versions() -> dict[str, str]:
    """Versions of Python and of the libraries that can change a figure; those not installed are left out."""
    versions = {"python": platform.python_version()}
    for name in LIBRARIES:
        try:
            versions[name] = version(name)
        except PackageNotFoundError:
            continue
    return versions


def _parameters(order: Order, subject: Subject) -> Mapping[str, object]:
    """The options that shape the result. Paths are left out: they may carry a name."""
    return {
        "preset": subject.preset.name,
        "preset chosen by": "the call" if order.preset else "the scan",
        "subject": subject.kind.value,
        "subject decided by": subject.reason,
        "voids measured": subject.measure_voids,
        "identity": "keep" if subject.keep_identity else "hide",
        "job sheet": bool(order.job),
    }
