"""Cases built by hand: everything that the report can be given, without running the stages before it."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from tomofolio.body.result import Body, Excluded
from tomofolio.case import Case, Provenance
from tomofolio.fitness.result import Fitness
from tomofolio.job import Job
from tomofolio.measure.result import Densest, Findings, PartFigures, RangeFigures, Spot, Spots
from tomofolio.preset import load_preset
from tomofolio.ranges.result import Histogram, Ranges, ValueRange
from tomofolio.remarks import Remark, Severity
from tomofolio.render.tables import TransferTable
from tomofolio.render.view import Caption, Key, Stroke, View
from tomofolio.series import Series
from tomofolio.volume import Basis, Grid, Kind, Unit, Volume

HASH = "3f9a0c1d2e4b" + "57" * 26

#: Invented markers that must not leave the building while identity is hidden.
IDENTITY = {
    "Patient name": "Quorvane^Ilse",
    "Patient ID": "ZX-99817-K",
    "Birth date": "1931-02-29",
    "Institution": "Clinic of Upper Vellmark",
    "Referring physician": "Tarbolde^Oskar",
    "Series description": "vellmark trial 7",
}

COLOURS = [(186, 206, 216), (96, 150, 172), (196, 112, 44), (122, 40, 60), (80, 80, 80)]


def make_volume(unit: Unit, uneven: bool = False) -> Volume:
    rng = np.random.default_rng(3)
    stored = np.full((20, 24, 28), -1000, np.int16)
    stored[4:16, 5:19, 6:22] = 1200
    stored += rng.normal(0, 40, stored.shape).astype(np.int16)
    gaps = np.where(np.arange(20) < 10, 0.5, 0.8) if uneven else np.full(20, 0.5)
    grid = Grid(np.array([-5.0, -4.0, 12.0]), np.eye(3), 0.4, 0.4, np.cumsum(gaps) - gaps[0], 24, 28)
    return Volume(stored, np.ones(20), np.zeros(20), grid, unit)


def make_ranges(number: int, names: tuple[str, ...] = (), named_by: str = "") -> tuple[Ranges, TransferTable]:
    centres = np.arange(-1400, 3200, 8.0)
    peaks = np.linspace(-1000, 2400, number)
    spreads = np.linspace(35, 60, number)
    sizes = 10.0 ** np.linspace(6, 4, number)
    model = sum(
        n * 8 / s / np.sqrt(2 * np.pi) * np.exp(-(((centres - p) / s) ** 2) / 2)
        for n, p, s in zip(sizes, peaks, spreads, strict=True)
    )
    model = model + np.where((centres > -1000) & (centres < 2400), 300.0, 0.0)
    counts = np.random.default_rng(5).poisson(model)
    middles = (peaks[1:] + peaks[:-1]) / 2
    edges = [None, *middles, None]
    items = []
    for n in range(number):
        low, high = edges[n], edges[n + 1]
        items.append(
            ValueRange(
                id=f"R{n + 1}",
                name=names[n] if names else f"R{n + 1}",
                named_by=named_by,
                lower=low,
                lower_95=None if low is None else (low - 6.5, low + 6.5),
                upper=high,
                upper_95=None if high is None else (high - 6.5, high + 6.5),
                peak=float(peaks[n]),
                spread=float(spreads[n]),
                pure_share=float(sizes[n] / sizes.sum()),
                background=n == 0,
            )
        )
    density = np.interp(np.linspace(-1400, 3200, 4096), [-900, 100, 3000], [0, 0.05, 0.6])
    table = TransferTable(
        first=-1400.0,
        last=3200.0,
        density_per_mm=density.astype(np.float32),
        colour=np.zeros((4096, 3), np.float32),
        range_colours=tuple((item.id, COLOURS[n % 5]) for n, item in enumerate(items[1:])),
    )
    return Ranges(tuple(items), Histogram(centres, counts.astype(np.int64), 8.0), model), table


def make_spots(number: int, seed: int = 11, unknown: bool = False) -> Spots:
    rng = np.random.default_rng(seed)
    volumes = np.sort(10.0 ** rng.normal(-1.5, 0.8, number))[::-1]
    items = []
    for n, v in enumerate(volumes):
        diameter = (6 * v / np.pi) ** (1 / 3)
        items.append(
            Spot(
                id=f"V{n + 1}",
                volume_mm3=float(v),
                volume_mm3_95=None if unknown else (float(v * 0.9), float(v * 1.12)),
                threshold_volume_mm3=float(v * 0.93),
                equivalent_diameter_mm=float(diameter),
                feret_max_mm=None if unknown else float(diameter * 1.3),
                sphericity=None if unknown else float(rng.uniform(0.5, 0.99)),
                position_mm=tuple(float(x) for x in rng.uniform(-60, 60, 3)),
                ligament_mm=None if n % 7 == 3 else float(rng.uniform(0.3, 9)),
                nearest_mm=None if number == 1 else float(rng.uniform(0.2, 5)),
                contrast=None if unknown else float(rng.uniform(0.7, 1.02)),
                open=n % 9 == 8,
                box=((0, 2), (0, 2), (0, 2)),
            )
        )
    closed = [item for item in items if not item.open]
    total = sum(item.volume_mm3 for item in closed)
    densest = Densest(3.4, 520.0, (1.25, -20.5, 33.0)) if closed else None
    percent = 100 * total / (5400.0 + total)
    return Spots(
        len(closed),
        total,
        (0.94 * total, 1.07 * total),
        percent,
        (0.94 * percent, 1.07 * percent),
        densest,
        tuple(items),
    )


def make_view(view_id: str, kind: str, title: str, shape: tuple[int, int] = (300, 360)) -> View:
    rows, columns = shape
    y, x = np.mgrid[:rows, :columns]
    inside = ((x - columns / 2) / (columns * 0.36)) ** 2 + ((y - rows / 2.2) / (rows * 0.34)) ** 2 < 1
    grey = np.where(inside, 90 + 60 * np.sin(x / 17.0) * np.cos(y / 23.0), 250).astype(np.uint8)
    noise = np.random.default_rng(rows).integers(0, 12, shape, dtype=np.uint8)
    grey = np.where(inside, grey + noise, grey).astype(np.uint8)
    pixels = np.stack((grey, grey, grey), -1) if kind == "render" else grey
    key = Key(colours=(("R2", COLOURS[0]), ("R3", COLOURS[1]))) if kind == "render" else Key(window=(400.0, 1800.0))
    bar = Stroke(((16.0, rows - 20.0), (16.0, rows - 14.0), (96.0, rows - 14.0), (96.0, rows - 20.0)), "scale")
    marks = (
        bar,
        Caption((56.0, rows - 10.0), "20 mm", "scale", "centre-top"),
        Caption((columns / 2, 8.0), "+Z", "letter"),
        Caption((8.0, rows / 2), "−X", "letter"),
    )
    return View(
        view_id,
        kind,
        title,
        "Seen from +Y, parallel projection, 0.25 mm per pixel. Window 400 ± 900.",
        pixels,
        0.25,
        marks,
        key,
    )


def make_views() -> tuple[View, ...]:
    renders = [make_view(f"render-{n}", "render", f"View {n}") for n in "abcdef"]
    renders.append(make_view("render-oblique", "render", "Oblique view", (320, 400)))
    sections = [make_view(f"section-{n}", "section", f"Section {n}", (280, 380)) for n in "abc"]
    sections.append(make_view("void-axial", "section", "Largest void, axial", (300, 300)))
    return (*renders, *sections, make_view("projection-a", "projection", "Projection", (240, 520)))


REMARKS = (
    Remark("slices-far-apart", Severity.CAUTION, "The slices are 3.1 times as far apart as the pixels."),
    Remark("unit-implied", Severity.NOTE, "The file declares no unit."),
)


@pytest.fixture(scope="session")
def case_of():
    """A function that builds a case; keyword arguments choose what is in it."""

    def build(
        kind: Kind = Kind.COMPONENT,
        *,
        voids: int | None = 12,
        ranges: int = 3,
        preset: str = "",
        keep: bool = True,
        job: Job | None = None,
        names: tuple[str, ...] = (),
        named_by: str = "",
        unknown: bool = False,
        uneven: bool = False,
        views: tuple[View, ...] | None = None,
    ) -> Case:
        component = kind is Kind.COMPONENT
        unit = Unit("grey value", "GV", Basis.IMPLIED) if component else Unit("CT number", "HU", Basis.DECLARED)
        volume = make_volume(unit, uneven)
        found, tables = make_ranges(ranges, names, named_by)
        figures = tuple(
            RangeFigures(
                item.id,
                12000.0 / (n + 1),
                None if unknown else (11900.0 / (n + 1), 12100.0 / (n + 1)),
                0.5 / (n + 1),
                None if unknown else item.peak + 1.5,
                None if unknown else item.spread * 1.1,
                7 * n + 1,
                9000.0 / (n + 1),
            )
            for n, item in enumerate(found.items)
        )
        fitness = (
            Fitness(
                *[None] * 9, remarks=(Remark("noise-unknown", Severity.CAUTION, "The noise could not be measured."),)
            )
            if unknown
            else Fitness(41.2, (0.3, 0.2, 0.2), 2200.0, 53.4, 0.31, (0.35, 0.29, 0.29), 1.10, 0.62, 1.35, REMARKS[:1])
        )
        findings = Findings(
            ranges=figures,
            part=None if unknown else PartFigures(5431.7, (5402.2, 5461.9), 2210.0),
            voids=make_spots(voids, unknown=unknown) if component and voids is not None else None,
            inclusions=make_spots(3, 17) if component and voids is not None else None,
        )
        identity = {**IDENTITY, "Component name": "Pump cover 7"} if component else IDENTITY
        return Case(
            job=job or Job(),
            preset=load_preset(preset or ("casting" if component else "case-note")),
            kind=kind,
            keep_identity=keep,
            series=Series(
                uid="1.2.826.0.1.3680043.8.498.7117",
                description="vellmark trial 7",
                modality="CT",
                sop_class="1.2.840.10008.5.1.4.1.1.2",
                kind=kind,
                kind_reason="The header says so.",
                identity=identity,
                acquisition={"Tube voltage": "120 kV", "Kernel": "B30s", "Manufacturer": "none recorded"},
                files=20,
                remarks=REMARKS[1:],
            ),
            volume=volume,
            ranges=found,
            body=Body(
                np.ones(volume.shape, np.uint8),
                (slice(4, 16), slice(5, 19), slice(6, 22)),
                100.0,
                (Excluded("support below the object", 123.4, (0.0, 31.2, 4.0), "thin beside the object"),),
            ),
            fitness=fitness,
            findings=findings,
            tables=tables,
            views=make_views() if views is None else views,
            provenance=Provenance(
                "0.1.0",
                {"preset": "casting", "voids measured": True, "nested": {"depth": 3, "levels": [1, 2.5]}},
                {"python": "3.12.3", "numpy": "2.1.0"},
                "2026-05-06T07:08:09+00:00",
                HASH,
            ),
        )

    return build


@pytest.fixture(scope="session")
def long_job() -> Job:
    """A job sheet with texts that are longer than any line."""
    long = "Housing of the secondary coolant pump, left-hand casting with two bosses, third heat after the mould repair"
    return replace(
        Job(),
        source='[subject]\nitem = "Housing"\n',
        title="Examination of a housing by computed tomography after the third repair of the mould, with all views",
        number="R-0042-2026-SERIES-B-AMENDED",
        item=long,
        customer="Foundry at the lower weir, department of incoming inspection",
        purpose="Survey of shrinkage near the bosses",
        received="2026-05-04",
        laboratory={
            "name": "Tomography room 2",
            "address": "4 Weir Lane",
            "operator": "B. Quill",
            "scanned": "2026-05-05",
        },
        reviewer_name="Dr Annelore Testwright-Featherstonehaugh",
        reviewer_qualification="Level 3, radiographic and computed tomographic testing",
        notes="The part was wrapped in foam.",
    )


@pytest.fixture(scope="session")
def identity_marks() -> tuple[str, ...]:
    return (
        "Quorvane",
        "Ilse",
        "ZX-99817-K",
        "1931-02-29",
        "Vellmark",
        "Tarbolde",
        "Oskar",
        "vellmark",
        "3680043.8.498.7117",
    )
