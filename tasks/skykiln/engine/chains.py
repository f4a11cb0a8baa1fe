"""Chains: a target stage with all that it rests on, judged before and after a bake."""

from typing import NamedTuple

from .seals import read_seal, trust_by, vouches
from .stage import Stage
from .staleness import HELD, Trust, Verdict, staleness


class Chain(NamedTuple):
    """The verdicts of a target and of every stage below it; what is read comes before what reads it.

    sealed : number of stages for which a seal vouches; there are no verdicts then
    night : that of the seal, empty if there is none
    """

    target: Stage
    verdicts: tuple[Verdict, ...]
    sealed: int = 0
    night: str = ""

    @property
    def stale(self) -> list[Verdict]:
        """The stages that will or may run."""
        return [verdict for verdict in self.verdicts if not verdict.settled]

    @property
    def held_by(self) -> tuple:
        """Why the target is held; empty when it isn't."""
        last = self.verdicts[-1:]
        return last[0].reasons if last and last[0].state == HELD else ()


def chain_of(target: Stage, believing: bool = True) -> Chain:
    """Judge a target as it stands now.

    Parameters: believing : whether size and time may stand for bytes; else all bytes are read
    """
    seal, memo = read_seal(target), {}
    trust = trust_by(seal, target) if believing else Trust(stamps=False)
    staleness(target.anew(), memo, trust)
    return Chain(target, tuple(memo.values()), night=seal.night if seal else "")


def glance_at(target: Stage) -> Chain:
    """Judge a target, without going into a chain that a seal vouches for."""
    seal = read_seal(target)
    return Chain(target, (), seal.stages, seal.night) if vouches(seal, target) else chain_of(target)


def stages_below(target: Stage) -> list:
    """A target and all stages that it rests on, unjudged."""
    found, waiting = {}, [target.anew()]
    while waiting:
        stage = waiting.pop()
        if stage.stamp_path not in found:
            found[stage.stamp_path] = stage
            waiting += stage.below.values()
    return list(found.values())
