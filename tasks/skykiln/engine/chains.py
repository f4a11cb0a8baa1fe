"""Chains: a target stage with all that it rests on, judged before and after a bake."""

from typing import NamedTuple

from .stage import Stage
from .staleness import HELD, Verdict, staleness


class Chain(NamedTuple):
    """The verdicts of a target and of every stage below it; what is read comes before what reads it."""

    target: Stage
    verdicts: tuple[Verdict, ...]

    @property
    def stale(self) -> list[Verdict]:
        """The stages that will or may run."""
        return [verdict for verdict in self.verdicts if not verdict.settled]

    @property
    def held_by(self) -> tuple:
        """Why the target is held; empty when it isn't."""
        last = self.verdicts[-1]
        return last.reasons if last.state == HELD else ()


def chain_of(target: Stage) -> Chain:
    """Judge a target as it stands now."""
    memo = {}
    staleness(target, memo)
    return Chain(target, tuple(memo.values()))
