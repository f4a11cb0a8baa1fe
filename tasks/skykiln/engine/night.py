"""A night: one run of the pipeline, and its summary night.json."""

import time
from datetime import UTC, datetime
from functools import cached_property
from pathlib import Path

from .atomic import sweep, write_atomically
from .chains import Chain, chain_of
from .digests import json_bytes
from .failures import Failure, forget_failure, read_failure
from .staleness import HELD
from .stamps import read_stamp

UNCHANGED, REBUILT, FAILED = "unchanged", "rebuilt", "failed"
STATES = (REBUILT, UNCHANGED, HELD, FAILED)


def now() -> str:
    """The time, ISO 8601 with offset."""
    return datetime.now(UTC).isoformat(timespec="seconds")


class Outcome:
    """What became of one target.

    chain : its chain as it was judged before; ran : the new stamps, with the stages they are of
    failure : why it is not up to date, or None
    held_by : the sentences that hold it back, if any
    """

    def __init__(self, before: Chain):
        stale = before.stale
        self.target = before.target
        stamps = [(verdict, read_stamp(verdict.stage.stamp_path)) for verdict in stale]
        self.ran = [(verdict.stage, stamp) for verdict, stamp in stamps if stamp not in (None, verdict.stamp)]
        after = chain_of(before.target) if stale else before
        self.failure = _failure(after)
        self.held_by = after.held_by

    @property
    def state(self) -> str:
        if self.failure:
            return FAILED
        if self.held_by:
            return HELD
        return REBUILT if self.ran else UNCHANGED

    def stages(self) -> list:
        """The stages that ran, as night.json lists them."""
        return [
            {"stage": stage.title, "reason": stamp.reason, "seconds": stamp.seconds}
            for stage, stamp in self.ran
        ]


class Night:
    """The chains as they stood when it began.

    started : ISO 8601 time, which also tells this night from others
    """

    def __init__(self, targets, started: str):
        self.started = started
        self._began = time.monotonic()
        self.chains = [chain_of(target) for target in targets]

    @property
    def stale(self) -> list[Chain]:
        """The chains in which a stage will or may run."""
        return [chain for chain in self.chains if chain.stale]

    def sweep(self):
        """Remove what earlier nights left half done where this one will work."""
        folders = set()
        for chain in self.stale:
            for verdict in chain.stale:
                forget_failure(verdict.stage)
                stage = verdict.stage
                folders |= {Path(path).parent for path in (stage.stamp_path, *stage.files().values())}
        for folder in folders:
            sweep(folder)

    @cached_property
    def outcomes(self) -> list[Outcome]:
        """What became of each target, as the stamps say it when this is first asked."""
        return [Outcome(chain) for chain in self.chains]

    @property
    def failures(self) -> list:
        """Pairs of the name of a target that is not up to date, and why."""
        return [(outcome.target.owner, outcome.failure) for outcome in self.outcomes if outcome.failure]

    @property
    def held(self) -> list:
        """Pairs of the name of a target that is held, and the sentences why."""
        return [(outcome.target.owner, outcome.held_by) for outcome in self.outcomes if outcome.held_by]

    @property
    def seconds(self) -> float:
        return round(time.monotonic() - self._began, 3)


def _failure(after: Chain) -> Failure | None:
    """Why a target is not up to date: the first stage that left a cause, else the first unfinished one."""
    unfinished = [verdict.stage for verdict in after.stale]
    for stage in unfinished:
        failure = read_failure(stage)
        if failure:
            return failure
    if unfinished:
        return Failure(unfinished[0].label, "was stopped before it ended; bake again", "")
    return None


def write_night(path: Path, record: dict):
    """Put night.json in its place."""
    write_atomically(path, [json_bytes(record)])
