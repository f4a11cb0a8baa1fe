"""From estimates whose standard errors are bounds to a verdict whose false alarms are counted.

A baked value may be off by what is allowed plus z standard errors. With errors as in `strata`, each
estimate exceeds z of them with probability 2 exp(-z^2/2) at most (Hoeffding 1963); the z that all tests of
a probe share follows from how often a *correct* probe may be called wrong, divided by the number of
tests (Bonferroni 1936), so that it holds however the tests depend on each other.

A fault that is small beside a single texel's noise shows in many at once. So each chart is tested by
its mean as well (too bright everywhere: errors of independent texels add in squares), and by its mean
square (a little wrong everywhere, with either sign): for T independent errors that exceed z with the
probability above, the chance that their squares average more than x > 1 is at most
exp(-T/2 (x - 1 - ln x)), as for a chi-square (Chernoff's bound; for sums of squares of variables with
Gaussian tails: Laurent and Massart 2000, lemma 1, gives the same in another form).
"""

import math

import numpy as np


def score_limit(false_alarm, tests):
    """The z that all of so many two-sided tests together exceed with probability `false_alarm` at most."""
    return math.sqrt(2.0 * math.log(2.0 * max(tests, 1) / false_alarm))


def square_limit(false_alarm, tests, terms):
    """The mean square of so many errors that each of `tests` such tests exceeds with its share of
    `false_alarm` at most: the x > 1 at which x - 1 - ln x = 2 ln(tests / false_alarm) / terms."""
    target = 2.0 * math.log(tests / false_alarm) / terms
    low, high = 1.0, 4.0 + 2.0 * target
    for _ in range(60):
        middle = (low + high) / 2
        low, high = (middle, high) if middle - 1 - math.log(middle) < target else (low, middle)
    return high


def allowance_used(deviations, allowed, errors, limit):
    """|deviation| over what it may be, allowed + limit errors; above 1: a fault. Arrays of one shape."""
    return np.abs(deviations) / (allowed + limit * errors)


def mean_used(deviations, allowed, errors, limit):
    """The same for means over the first axis, (T, C) -> means, errors of them, and shares used (C,)."""
    mean = deviations.mean(axis=0)
    error = np.sqrt((errors**2).sum(axis=0)) / len(errors)
    return mean, error, allowance_used(mean, allowed.mean(axis=0), error, limit)


def squares_used(deviations, allowed, errors, false_alarm, tests):
    """The mean square of what exceeds the allowance, in errors, over what it may be. (T, C) -> (C,)."""
    beyond = np.maximum(np.abs(deviations) - allowed, 0.0) / errors
    return (beyond**2).mean(axis=0) / square_limit(false_alarm, tests, len(errors))
