"""The one exponent that makes a probe fit its codings: radiance = stored value x 2^storage_ev."""

import math

# The smallest finite maximum among the codings: blue of the packed 11-11-10 float format (Khronos Data
# Format Specification 1.3, section 10.3, number from memory): (1 + 31/32) 2^15.
STORED_MAX = 64512.0


def storage_ev(largest):
    """The smallest whole number of stops, 0 or more, after which `largest` fits STORED_MAX.

    Parameters
    ----------
    largest : finite radiance, the greatest value of any file of the probe.
    """
    if not math.isfinite(largest):
        raise ValueError(f"the largest radiance is {largest}")
    stops = 0
    while math.ldexp(largest, -stops) > STORED_MAX:
        stops += 1
    return stops
