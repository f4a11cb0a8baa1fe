"""A night: one run of the pipeline, and its summary night.json."""

import os
import time
from datetime import UTC, datetime
from functools import cached_property
from pathlib import Path
from typing import NamedTuple

from .atomic import remove, sweep, sync_file_systems, write_atomically, write_beside
from .chains import Chain, chain_of, glance_at, stages_below
from .digests import json_bytes
from .failures import Failure, forget_failure, read_failure
from .seals import Ran, ran_in, read_seal, vouches, write_seal
from .staleness import HELD, WILL_RUN
from .stamps import void_stamp

UNCHANGED, REBUILT, FAILED = "unchanged", "rebuilt", "failed"
STATES = (REBUILT, UNCHANGED, HELD, FAILED)


def now() -> str:
    """The time, ISO 8601 with offset; fine enough to tell one night from the next."""
    return datetime.now(UTC).isoformat(timespec="milliseconds")


class Standing(NamedTuple):
    """How a target stood when the night began: of ten thousand probes no more can be kept.

    waiting : number of stages that will or may run; sealed : whether a seal vouched for all
    night : that of the seal; held_by : the sentences that hold it back, if any
    """

    target: object
    waiting: int
    sealed: bool
    night: str
    held_by: tuple

    @classmethod
    def of(cls, chain: Chain) -> "Standing":
        return cls(chain.target, len(chain.stale), bool(chain.sealed), chain.night, chain.held_by)


class Outcome:
    """What became of one target.

    ran : the stages that ran in this night
    failure : why it is not up to date, or None
    held_by : the sentences that hold it back, if any
    """

    def __init__(self, before: Standing, night: str):
        self.target = before.target
        self.ran, self.failure, self.held_by = [], None, before.held_by
        if before.waiting or before.night == night:
            seal = read_seal(before.target)
            if vouches(seal, before.target) and seal.night == night:
                self.ran = [Ran(*told) for told in seal.ran]
            else:
                after = chain_of(before.target)
                self.ran = ran_in(night, after.verdicts)
                self.failure, self.held_by = failure_of(after), after.held_by

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
            {"stage": ran.title, "reason": ran.reason, "seconds": ran.seconds} for ran in self.ran
        ]


class Night:
    """The targets as they stood when it began.

    started : ISO 8601 time, which also tells this night from others
    """

    def __init__(self, targets, started: str, verified: bool = False):
        """`verified`: read the bytes of all outputs, and call for a new run where they are not right."""
        self.started = started
        self._began = time.monotonic()
        judge = _verified if verified else glance_at
        self.standings = [Standing.of(judge(target)) for target in targets]

    @property
    def stale(self) -> list[Standing]:
        """The targets for which a stage will or may run."""
        return [standing for standing in self.standings if standing.waiting]

    def sweep(self):
        """Remove what earlier nights left half done: it lies where no seal stands."""
        for standing in [standing for standing in self.standings if not standing.sealed]:
            stages = stages_below(standing.target)
            paths = (path for stage in stages for path in (stage.stamp_path, *stage.paths.values()))
            folders = list(filter(os.path.isdir, {os.path.dirname(path) for path in paths}))
            for folder in folders:
                sweep(folder)
            if folders:
                for stage in stages:
                    forget_failure(stage)

    @cached_property
    def outcomes(self) -> list[Outcome]:
        """What became of each target, as the stamps say it when this is first asked."""
        return [Outcome(standing, self.started) for standing in self.standings]

    def seal(self):
        """Seal the chains that stand without a seal: those that Luigi made stage by stage, or other code."""
        unsealed = [standing.target for standing in self.standings if not standing.sealed]
        settled = [target for target in unsealed if _stands_without_seal(target)]
        if settled:
            sync_file_systems({os.path.dirname(target.seal_path) for target in settled})
        for target in settled:
            write_seal(target, chain_of(target).verdicts)

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


def _stands_without_seal(target):
    chain = glance_at(target)
    return not chain.sealed and not chain.stale


def _verified(target) -> Chain:
    chain = chain_of(target, believing=False)
    for verdict in chain.verdicts:
        if verdict.state == WILL_RUN:  # whoever runs it believes sizes and times
            void_stamp(verdict.stage.stamp_path, "; ".join(verdict.reasons))
    return chain


def failure_of(after: Chain) -> Failure | None:
    """Why a target is not up to date: the first stage that left a cause, else the first unfinished one."""
    unfinished = [verdict.stage for verdict in after.stale]
    for stage in unfinished:
        failure = read_failure(stage)
        if failure:
            return failure
    if unfinished:
        return Failure(unfinished[0].label, "was stopped before it ended; bake again", "")
    return None


def shared_night_id(path: Path) -> str:
    """The id of the night that the shards of a farm have in common, which the first of them gives.

    Parameters: path : the file that holds it until the night ends
    """
    if not path.exists():
        beside = write_beside(path, [now().encode()], synced=False)
        try:
            os.link(beside, path)  # unlike a rename, only one can win
        except FileExistsError:
            pass
        finally:
            remove(beside)
    return path.read_text()


def write_night(path: Path, record: dict):
    """Put night.json in its place."""
    write_atomically(path, [json_bytes(record)])
