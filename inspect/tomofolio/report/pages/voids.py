"""Page "voids": the figures, what they mean, sizes, and the tables of voids and inclusions."""

from __future__ import annotations

import math

from tomofolio.measure import boundaries_statement
from tomofolio.measure.result import Spots
from tomofolio.report.facts import Fact, FactGrid, figure_fact
from tomofolio.report.numbers import count, figure, known, percent, plain, volume, with_unit
from tomofolio.report.setting import Setting
from tomofolio.report.sizes import Limit, SizeChart
from tomofolio.report.spot_table import MOST_ROWS, spot_table
from tomofolio.report.text import head, page_head, para, points, small

# isort: split
from reportlab.platypus import Flowable

#: A chart of sizes says something from this many on.
FEWEST_FOR_CHART = 5


def voids_page(setting: Setting) -> list[Flowable]:
    """The page's flowables."""
    findings = setting.case.findings
    if not setting.measures_voids:
        why = setting.reason("voids-not-for-patients", "voids-need-background", "no-object")
        if why == setting.reason():
            why = f"The preset {setting.case.preset.name} leaves them out."
        return [*page_head("Voids and inclusions", "Not measured in this scan."), para(why)]
    lead = "Closed voids and inclusions in the material, found by their deficit or surplus of grey value."
    parts: list[Flowable] = page_head("Voids and inclusions", lead)
    if findings.voids is not None:
        parts += _spots(setting, findings.voids, "Voids", "void", "voids")
    if findings.inclusions is not None:
        parts += _spots(setting, findings.inclusions, "Inclusions", "inclusion", "inclusions")
    case = setting.case
    stated = boundaries_statement(case.volume, case.ranges, case.body, case.fitness)
    sentences = [setting.sentence(text) for text in stated]
    if sentences:
        parts += [*head("Where void, outside and material part"), *points(sentences)]
    return parts


def _spots(setting: Setting, spots: Spots, title: str, one: str, many: str) -> list[Flowable]:
    parts = head(title)
    facts = _facts(setting, spots, one, many)
    parts.append(FactGrid(facts, columns=4))
    if not spots.items:
        parts.append(para(f"No {one} large enough was found. This does not mean that there is none."))
        return parts
    diameters = [spot.equivalent_diameter_mm for spot in spots.items if known(spot.equivalent_diameter_mm)]
    if len(diameters) >= FEWEST_FOR_CHART:
        fitness = setting.case.fitness
        limits = [
            Limit(diameter, f"{name} {figure(diameter).value}\u2009mm")
            for diameter, name in (
                (fitness.detectable_diameter_mm, "found from"),
                (fitness.measurable_diameter_mm, "measured from"),
            )
            if diameter is not None and known(diameter)
        ]
        parts.append(SizeChart(diameters, limits if one == "void" else [], many))
    shown = spots.items[:MOST_ROWS]
    if len(shown) < len(spots.items):
        text = f"The table holds the {MOST_ROWS} largest of {count(len(spots.items))} {many}. "
        text += "All of them are in the data file voids.csv that the option --data writes."
        parts.append(para(text))
    spacing = min(setting.case.volume.grid.spacing_mm)
    decimals = max(0, 1 - math.floor(math.log10(spacing))) if spacing > 0 else 1
    if one == "void" or not (setting.case.findings.voids and setting.case.findings.voids.items):
        parts.append(small(_legend(setting)))
    parts.append(spot_table(setting, shown, decimals))
    return parts


def _facts(setting: Setting, spots: Spots, one: str, many: str) -> list[Fact]:
    reason = setting.reason("no-object", "voids-need-background")
    opened = sum(spot.open for spot in spots.items)
    share = "Porosity" if one == "void" else "Share of the part"
    facts = [
        Fact(f"Closed {many}", count(spots.count)),
        figure_fact("Total volume", volume(spots.total_mm3, spots.total_mm3_95), reason),
        figure_fact(share, percent(spots.porosity_percent, spots.porosity_percent_95), reason),
    ]
    if opened:
        facts.append(Fact("Open to the outside", count(opened), "listed, not in the sums"))
    if spots.densest is not None:
        densest = spots.densest
        place = ", ".join(plain(x, 1) for x in densest.position_mm)
        where = f"in {volume(densest.reference_volume_mm3)} around {place}\u2009mm"
        facts.append(figure_fact("Densest place", percent(densest.porosity_percent), reason, where))
    if spots.items:
        largest = spots.items[0]
        diameter = with_unit(figure(largest.equivalent_diameter_mm).value, "mm")
        facts.append(
            figure_fact(
                f"Largest {one}",
                volume(largest.volume_mm3, largest.volume_mm3_95),
                reason,
                f"{largest.id}, diameter {diameter}",
            )
        )
    return facts


def _legend(setting: Setting) -> str:
    """What the columns of the table are; it stands once, above the first table."""
    words = setting.words
    return (
        "Volume: best estimate, from the deficit or surplus of grey value. By threshold: voxels past the half-way "
        "value, common practice and too small for small ones. Equivalent diameter: of a sphere of that volume. Feret "
        "diameter: the longest. Position: weighted centroid, in the coordinate system of the scan. "
        f"{words.ligament.capitalize()}: shortest distance to the outside surface. To the nearest: surface to surface. "
        f"{words.contrast.capitalize()}: 1 is air. –: not available, the scan cannot tell it for this one."
    )
