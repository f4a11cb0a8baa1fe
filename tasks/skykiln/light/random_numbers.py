"""Random numbers inside kernels: SplitMix64, one stream per texel, the same for any number of threads.

Source: Steele, Lea and Flood 2014, "Fast splittable pseudorandom number generators" (constants from
memory). A stream's state is an array of one uint64; it starts from a seed and the stream's number.
"""

import numpy as np

from skykiln.jit import formula

_STEP = np.uint64(0x9E3779B97F4A7C15)
_FIRST = np.uint64(0xBF58476D1CE4E5B9)
_SECOND = np.uint64(0x94D049BB133111EB)
_S30, _S27, _S31, _S11 = np.uint64(30), np.uint64(27), np.uint64(31), np.uint64(11)
_ONE = np.uint64(1)
_UNIT = 2.0**-53


@formula
def mixed(z):
    """The output function: every bit of z moves half of the result's bits."""
    z = (z ^ (z >> _S30)) * _FIRST
    z = (z ^ (z >> _S27)) * _SECOND
    return z ^ (z >> _S31)


@formula
def stream(seed, number):
    """The state of the stream of that number."""
    state = np.empty(1, dtype=np.uint64)
    state[0] = mixed(seed ^ mixed((number + _ONE) * _STEP))
    return state


@formula
def next_uniform(state):
    """The next number in 0 <= u < 1, 53 bits; moves the state on."""
    state[0] += _STEP
    return np.float64(mixed(state[0]) >> _S11) * _UNIT
