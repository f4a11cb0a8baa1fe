"""Seals: one small file per target that vouches for its whole chain.

A seal is written when the whole chain of a target is settled and on the disk. It holds what was asked for,
the code that answered, and size and time of every output; while these stand, nothing below the target
needs to be looked at: an unchanged night reads one file per probe. The first stage that runs breaks it.
"""

import json
import os
from contextlib import suppress
from typing import NamedTuple

from ..errors import FileError
from .atomic import remove, write_atomically
from .digests import bytes_of, digest_chunks
from .relative import joined, relative_to
from .release import code_digest
from .staleness import UP_TO_DATE, Trust


class Ran(NamedTuple):
    """A stage that ran in a night."""

    label: str
    title: str
    reason: str
    seconds: float


class Seal(NamedTuple):
    """What a target and the stages below it were when all was on the disk.

    asked, code : digests of what the target was asked for, and of the code that answered
    night : the night in which it was written; stages : their number, 0 if the target is held
    files : path relative to the seal's folder, size, time in ns, of every output
    ran : the values of a Ran for each stage that ran in that night
    """

    asked: str
    code: str
    night: str
    stages: int
    files: list
    ran: list


def ran_in(night: str, verdicts) -> list[Ran]:
    """The stages that ran in a night, by their stamps."""
    stamped = [(verdict.stage, verdict.stamp) for verdict in verdicts if verdict.stamp]
    return [
        Ran(stage.label, stage.title, stamp.reason, stamp.seconds)
        for stage, stamp in stamped
        if stamp.night == night
    ]


def read_seal(target) -> Seal | None:
    """The seal of a target, or None when there is none that can be understood."""
    try:
        return Seal(**json.loads(bytes_of(target.seal_path)))
    except (OSError, ValueError, TypeError):
        return None


def vouches(seal: Seal | None, target) -> bool:
    """Whether the seal says that the target, as it is asked for now, is up to date."""
    if seal is None or not seal.stages or (seal.asked, seal.code) != _sign(target):
        return False
    return all(_stands(path, size, mtime_ns) for path, size, mtime_ns in _files(seal, target))


def trust_by(seal: Seal | None, target) -> Trust:
    """Which outputs are known to be on the disk, whatever is asked for now."""
    return Trust(frozenset(_files(seal, target) if seal else ()))


def write_seal(target, verdicts):
    """Seal a target, all of whose outputs must be on the disk.

    Parameters: verdicts : those of its whole chain, all settled
    """
    folder = os.path.dirname(target.seal_path)
    files = [
        [relative_to(folder, path), *verdict.stamp.outputs[role].seen]
        for verdict in verdicts
        if verdict.state == UP_TO_DATE
        for role, path in verdict.stage.paths.items()
    ]
    ran = ran_in(target.night, verdicts)
    whole = all(verdict.state == UP_TO_DATE for verdict in verdicts)
    seal = Seal(*_sign(target), target.night, len(verdicts) if whole else 0, files, ran)
    data = json.dumps(seal._asdict(), ensure_ascii=False).encode()
    with suppress(FileError):  # all is made and stamped; without a seal it is only looked at more closely
        write_atomically(target.seal_path, [data], synced=False)


def break_seal(stage):
    """Take away the seal of the target that a stage works for."""
    remove(stage.seal_path)


def _sign(target):
    return digest_chunks([target.wanted.encode()]), code_digest(target.known_versions())


def _files(seal, target):
    folder = os.path.dirname(target.seal_path)
    for file, size, mtime_ns in seal.files:
        yield joined(folder, file), size, mtime_ns


def _stands(path, size, mtime_ns):
    try:
        status = os.stat(path)
    except OSError:
        return False
    return (status.st_size, status.st_mtime_ns) == (size, mtime_ns)
