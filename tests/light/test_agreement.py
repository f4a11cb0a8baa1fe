"""Two codings of one cube map agree when no texel, nor the flux of all, is farther off than rounding."""

import numpy as np
import pytest

from skykiln.light.agreement import FLUX, agreement

LEVEL = np.random.default_rng(3).uniform(1, 2, (6, 4, 4, 3)).astype(np.float32)
ALLOWED = np.full_like(LEVEL, 0.01)


def test_what_is_rounded_agrees():
    found = agreement(LEVEL, np.round(LEVEL, 2), ALLOWED)
    assert found.used <= 0.51
    assert found.share == 1


@pytest.mark.parametrize("value", [1.7, np.nan, np.inf])
def test_one_texel_apart_is_seen_and_counted(value):
    other = LEVEL.copy()
    other[3, 1, 2, 0] = value if not value < 2 else LEVEL[3, 1, 2, 0] + 0.011
    found = agreement(LEVEL, other, ALLOWED)
    assert found.used > 1
    assert found.share == pytest.approx(1 - 1 / 96)


def test_flux_that_is_off_everywhere_is_seen_where_no_texel_is():
    found = agreement(LEVEL, LEVEL * np.float32(1 + 1.5 * FLUX), np.full_like(LEVEL, 1))
    assert found.flux == pytest.approx(1.5 * FLUX, rel=1e-3)
    assert found.used == pytest.approx(1.5, rel=1e-3)
    assert found.share == 1


def test_nothing_is_allowed_where_nothing_is_rounded():
    none = np.zeros_like(LEVEL)
    assert agreement(LEVEL, LEVEL, none).used == 0
    assert agreement(LEVEL, LEVEL + np.float32(1e-6), none).used > 1e20
