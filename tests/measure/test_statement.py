"""The sentences name the boundaries of this run."""

from dataclasses import replace

from tomofolio.body.result import Body
from tomofolio.measure.statement import boundaries_statement
from tomofolio.volume import Basis, Unit


def test_boundaries_of_the_run_are_named_with_interval_and_unit(phantoms):
    scan = phantoms.scan(phantoms.sphere(9), phantoms.grid_of((28, 28, 28)), blur=0.8, cnr=10, seed=1)
    volume = replace(scan[0], unit=Unit("CT number", "HU", Basis.DECLARED))
    ranges = phantoms.ranges_of(1000, 11000, 16000, half_width=120)
    sentences = boundaries_statement(volume, ranges, scan[2], scan[3])
    text = " ".join(sentences)
    assert "Outside is what lies below 6000 HU (95 % interval 5880 to 6120 HU)" in text
    assert "R2 ends and R3 begins at 13500 HU (95 % interval 13380 to 13620 HU)." in text
    assert all(sentence.endswith(".") for sentence in sentences)


def test_scan_without_background_says_that_nothing_is_outside(phantoms):
    volume = phantoms.volume_of(phantoms.share_of(phantoms.grid_of((8, 8, 8)), phantoms.sphere(3)))
    body = Body((volume.stored * 0 + 1).astype("uint8"), (slice(0, 8),) * 3, None)
    fitness = phantoms.scan(phantoms.sphere(8), phantoms.grid_of((24, 24, 24)), blur=0.5, cnr=20, seed=1)[3]
    first, *_ = boundaries_statement(volume, phantoms.ranges_of(500, background=False), body, fitness)
    assert "no background" in first and "nothing as outside" in first


def test_negative_and_small_values_keep_their_digits(phantoms):
    scan = phantoms.scan(phantoms.sphere(9), phantoms.grid_of((28, 28, 28)), blur=0.8, cnr=10, seed=1)
    body = replace(scan[2], threshold=-0.00213)
    text = boundaries_statement(scan[0], phantoms.ranges_of(-0.005, 0.001), body, scan[3])[0]
    assert "below −0.00213" in text
