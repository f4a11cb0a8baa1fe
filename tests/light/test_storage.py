"""The exponent of a probe."""

import math

import numpy as np
import pytest

from skykiln.light.storage import STORED_MAX, storage_ev


def test_what_fits_is_not_darkened():
    assert storage_ev(0.0) == 0
    assert storage_ev(STORED_MAX) == 0


def test_the_next_float_above_the_limit_takes_a_stop():
    assert storage_ev(math.nextafter(STORED_MAX, math.inf)) == 1
    assert storage_ev(2 * STORED_MAX) == 1
    assert storage_ev(math.nextafter(2 * STORED_MAX, math.inf)) == 2


def test_a_suns_luminance_takes_fifteen_stops():
    # 1.6e9 cd/m2, the sun's luminance (from memory, common practice).
    assert storage_ev(1.6e9) == 15


@pytest.mark.parametrize("largest", np.geomspace(1e-3, 3e38, 40))
def test_the_exponent_is_the_smallest_that_fits(largest):
    stops = storage_ev(largest)
    assert largest / 2.0**stops <= STORED_MAX
    assert stops == 0 or largest / 2.0 ** (stops - 1) > STORED_MAX


def test_the_limit_is_the_largest_blue_of_packed_floats():
    # Khronos Data Format Specification: 5 exponent bits of bias 15, 5 bits of mantissa.
    assert STORED_MAX == (1 + 31 / 32) * 2**15


@pytest.mark.parametrize("largest", [math.nan, math.inf])
def test_what_is_not_finite_is_refused(largest):
    with pytest.raises(ValueError, match="largest radiance"):
        storage_ev(largest)
