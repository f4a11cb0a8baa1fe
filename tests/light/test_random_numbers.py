"""Streams of random numbers."""

import numpy as np

from skykiln.light.random_numbers import _STEP, mixed, next_uniform, stream


def test_output_is_that_of_splitmix64():
    # First three outputs for the seed 1234567, as listed with public implementations (from memory).
    state = np.uint64(1234567)
    outputs = []
    for _ in range(3):
        with np.errstate(over="ignore"):
            state = state + _STEP
            outputs.append(int(mixed(state)))
    assert outputs == [6457827717110365317, 3203168211198807973, 9817491932198370423]


def test_numbers_are_even_and_streams_differ():
    with np.errstate(over="ignore"):
        first, second = stream(np.uint64(5), np.uint64(0)), stream(np.uint64(5), np.uint64(1))
        a = np.array([next_uniform(first) for _ in range(4000)])
        b = np.array([next_uniform(second) for _ in range(4000)])
    for values in (a, b):
        assert values.min() >= 0 and values.max() < 1
        counts = np.histogram(values, bins=16, range=(0, 1))[0]
        assert ((counts - 250) ** 2 / 250).sum() < 40  # chi-square with 15 degrees of freedom
    assert abs(np.corrcoef(a, b)[0, 1]) < 0.06
    assert abs(np.corrcoef(a[:-1], a[1:])[0, 1]) < 0.06


def test_a_stream_depends_on_its_seed_and_number_alone():
    with np.errstate(over="ignore"):
        assert stream(np.uint64(5), np.uint64(3))[0] == stream(np.uint64(5), np.uint64(3))[0]
        assert stream(np.uint64(5), np.uint64(3))[0] != stream(np.uint64(6), np.uint64(3))[0]
