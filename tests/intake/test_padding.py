"""Padding is no data only where it is connected to the border of its slice."""

import numpy as np
import pytest
from scipy import ndimage

from tomofolio.intake import read_series
from tomofolio.intake.padding import reached_from_border

PAD = -1500


def circle(shape=(40, 44), radius=18.0):
    y, x = np.ogrid[: shape[0], : shape[1]]
    return np.hypot(y - (shape[0] - 1) / 2, x - (shape[1] - 1) / 2) < radius


def padded_stack(slices=5):
    stored = np.full((slices, 40, 44), 100, np.int16)
    stored[:, ~circle()] = PAD
    return stored


def test_outside_of_the_reconstruction_circle_is_no_data(tmp_path, make_series):
    make_series(tmp_path, padded_stack(), PixelPaddingValue=PAD)
    no_data = read_series(tmp_path)[0].no_data
    assert no_data.dtype == bool
    np.testing.assert_array_equal(no_data, np.broadcast_to(~circle(), no_data.shape))


def test_voids_clipped_to_the_padding_value_stay_data_even_in_the_first_and_last_slice(tmp_path, make_series):
    stored = padded_stack()
    stored[:, 18:23, 18:23] = PAD
    make_series(tmp_path, stored, PixelPaddingValue=PAD)
    no_data = read_series(tmp_path)[0].no_data
    np.testing.assert_array_equal(no_data, np.broadcast_to(~circle(), no_data.shape))


def test_there_is_no_mask_without_padding(tmp_path, make_series):
    stored = np.full((4, 40, 44), 100, np.int16)
    stored[:, 10:20, 10:20] = PAD
    make_series(tmp_path / "enclosed", stored, PixelPaddingValue=PAD)
    make_series(tmp_path / "undeclared", padded_stack())
    assert read_series(tmp_path / "enclosed")[0].no_data is None
    assert read_series(tmp_path / "undeclared")[0].no_data is None


def test_padding_is_compared_before_the_rescale(tmp_path, make_series):
    stored = padded_stack()
    make_series(tmp_path, stored, PixelPaddingValue=PAD, RescaleSlope="2", RescaleIntercept=str(-1024))
    np.testing.assert_array_equal(read_series(tmp_path)[0].no_data, stored == PAD)


def test_range_limit_widens_the_padding(tmp_path, make_series):
    stored = padded_stack()
    stored[:, 0] = PAD + 7
    stored[:, 1] = PAD + 11
    make_series(tmp_path, stored, PixelPaddingValue=PAD + 10, PixelPaddingRangeLimit=PAD)
    expected = (stored >= PAD) & (stored <= PAD + 10)
    np.testing.assert_array_equal(read_series(tmp_path)[0].no_data, expected)


def test_padding_value_written_with_the_wrong_sign_is_understood(tmp_path, make_slice, save_slice):
    # Some writers encode −1500 of signed pixels as the unsigned 64036.
    stored = padded_stack()
    for k, pixels in enumerate(stored):
        data = make_slice(pixels, k)
        data.add_new(0x00280120, "US", PAD + 65536)
        save_slice(data, tmp_path / f"{k}.dcm")
    np.testing.assert_array_equal(read_series(tmp_path)[0].no_data, stored == PAD)


def test_padding_of_unsigned_pixels(tmp_path, make_series):
    stored = np.where(circle(), 100, 63536).astype(np.uint16)[None].repeat(4, axis=0)
    make_series(tmp_path, stored, PixelPaddingValue=63536)
    volume, _ = read_series(tmp_path)
    assert volume.stored.dtype == np.uint16
    np.testing.assert_array_equal(volume.no_data, stored == 63536)


@pytest.mark.parametrize("seed", range(12))
@pytest.mark.parametrize("share", [0.3, 0.55, 0.8])
def test_border_connection_agrees_with_plain_propagation(seed, share):
    # SciPy's binary propagation from the border pixels, in the plane, by shared edges.
    mask = np.random.default_rng(seed).random((31, 23)) < share
    seeds = mask.copy()
    seeds[1:-1, 1:-1] = False
    expected = ndimage.binary_propagation(seeds, mask=mask)
    found = reached_from_border(mask)
    np.testing.assert_array_equal(np.zeros_like(mask) if found is None else found, expected)
