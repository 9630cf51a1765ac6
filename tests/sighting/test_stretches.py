"""The sums along stretches against what the transform must be: exact properties."""

from __future__ import annotations

import numpy as np
import pytest

from readout.sighting.stretches import averaged, stretches_of


def test_each_stretch_takes_one_pixel_of_each_row_within_one_column_of_its_line():
    """One lit pixel a picture shows which stretches it belongs to.

    The published bound on how far the approximate line strays is (log2 rows) / 6 on average and
    below 1 for 8 rows (M. L. Brady, SIAM J. Comput. 27 (1998) 107); one column is asked here.
    """
    rows, columns, bands = 8, 40, 6
    for row in range(rows):
        small = np.zeros((bands * rows, columns), dtype=np.float32)
        small[rows + row, 20] = 1.0
        stretches = stretches_of(small)
        assert stretches.rows == rows
        assert np.all(np.delete(stretches.sums, 1, axis=1) == 0)
        for slope, sums in zip(stretches.slopes, stretches.sums[:, 1], strict=True):
            (column,) = np.nonzero(sums)[0]  # exactly one
            assert sums[column] == 1
            assert abs(column + slope * (row - (rows - 1) / 2) - 20) < 1


@pytest.mark.parametrize("shape", [(48, 20), (51, 33), (24, 20), (100, 17)])
def test_a_flat_picture_sums_to_its_rows(shape):
    """Up to the border: beyond it the picture goes on as it ended."""
    stretches = stretches_of(np.full(shape, 3.0, dtype=np.float32))
    assert np.all(stretches.sums == 3.0 * stretches.rows)
    assert stretches.sums.shape[2] == shape[1]


def test_the_slopes_reach_nearly_45_degrees_in_even_steps_about_0():
    slopes = stretches_of(np.zeros((64, 20), dtype=np.float32)).slopes
    assert slopes[len(slopes) // 2] == 0
    assert np.ptp(np.diff(slopes)) < 1e-12
    assert slopes[-1] == -slopes[0] == pytest.approx(6 / 7)


def test_too_few_rows_give_none():
    assert stretches_of(np.zeros((23, 100), dtype=np.float32)) is None


@pytest.mark.parametrize("dtype", [np.uint8, np.uint16])
@pytest.mark.parametrize("shape", [(480, 640), (481, 643), (30, 50)])
def test_the_averaged_picture_is_the_mean_of_its_cells(shape, dtype):
    """Against numpy; the cells at the far borders hold fewer pixels, repeated."""
    rng = np.random.default_rng(31)
    pixels = rng.integers(0, np.iinfo(dtype).max, shape, endpoint=True).astype(dtype)
    small, step = averaged(pixels)
    rows, columns = shape[0] // step, shape[1] // step
    whole = pixels[: rows * step, : columns * step].astype(np.float64)
    means = whole.reshape(rows, step, columns, step).mean(axis=(1, 3))
    assert small[:rows, :columns] == pytest.approx(means, rel=1e-5)
    assert small.shape == (-(-shape[0] // step), -(-shape[1] // step))
