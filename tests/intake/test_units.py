"""What the values mean: declared, implied by the standard, or nothing."""

import numpy as np
import pytest

from tomofolio.intake import read_series, survey
from tomofolio.volume import Basis


def is_component(k, data):
    data.add_new(0x00143073, "LO", "1")


# DICOM PS3.3 C.11.1.1.2 and C.8.2.1.1.2 (from memory): Rescale Type may be left out where the values are HU.
@pytest.mark.parametrize(
    ("elements", "component", "quantity", "symbol", "basis"),
    [
        ({"RescaleType": "HU"}, False, "CT number", "HU", Basis.DECLARED),
        ({"RescaleType": "HU"}, True, "CT number", "HU", Basis.DECLARED),
        ({"RescaleType": None}, False, "CT number", "HU", Basis.IMPLIED),
        ({"RescaleType": ""}, False, "CT number", "HU", Basis.IMPLIED),
        ({"RescaleType": None}, True, "grey value", "GV", Basis.IMPLIED),
        ({"RescaleType": "US"}, False, "grey value", "GV", Basis.DECLARED),
        ({"RescaleType": "MGML"}, False, "other", "MGML", Basis.DECLARED),
        ({"RescaleType": "ED"}, True, "other", "ED", Basis.DECLARED),
        ({"RescaleType": None, "ImageType": ["DERIVED", "PRIMARY"]}, False, "grey value", "GV", Basis.IMPLIED),
        ({"RescaleType": None, "ImageType": None}, False, "grey value", "GV", Basis.IMPLIED),
    ],
)
def test_unit_is_what_the_header_declares_or_the_standard_implies(
    tmp_path, make_series, make_stored, elements, component, quantity, symbol, basis
):
    make_series(tmp_path, make_stored(), change=is_component if component else None, **elements)
    unit = read_series(tmp_path)[0].unit
    assert (unit.quantity, unit.symbol, unit.basis) == (quantity, symbol, basis)
    assert survey(tmp_path)[0].unit == symbol


def test_missing_rescale_is_one_and_zero(tmp_path, make_series, make_stored):
    stored = make_stored()
    make_series(tmp_path, stored, RescaleSlope=None, RescaleIntercept=None)
    np.testing.assert_array_equal(read_series(tmp_path)[0].values(slice(None)), stored)


def test_grey_values_come_with_a_caution(tmp_path, make_series, make_stored):
    make_series(tmp_path, make_stored(), RescaleType="US")
    remark = next(r for r in read_series(tmp_path)[1].remarks if r.code == "values-without-unit")
    assert remark.severity == "caution"
