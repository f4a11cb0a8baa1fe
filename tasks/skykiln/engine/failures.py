"""Failures: why a stage could not run, left beside its stamp, for whoever started the night.

Stages may run in other processes; a file is how the cause gets home. It goes when the stage succeeds.
"""

import json
import sys
import traceback
from contextlib import contextmanager
from typing import NamedTuple

from ..errors import SkykilnError
from .atomic import remove, write_atomically
from .digests import bytes_of, json_bytes

_unwritten: dict = {}  # path -> Failure, of this process


class Failure(NamedTuple):
    """What stopped a stage.

    cause : the sentence for the user; traceback : empty unless it is a bug
    """

    stage: str
    cause: str
    traceback: str


@contextmanager
def recorded(stage):
    """Leave a failure file when the block raises, none when it doesn't."""
    try:
        yield
    except Exception as error:
        _record(stage, _failure(stage, error))
        raise
    path = failure_path(stage)
    _unwritten.pop(path, None)
    remove(path)


def read_failure(stage) -> Failure | None:
    """The failure that a stage left, if it did."""
    path = failure_path(stage)
    return _unwritten.get(path) or _read(path)


def is_failure(path) -> bool:
    """Whether a file is such a cause."""
    return _read(path) is not None


def forget_failure(stage):
    """Remove what an earlier night left."""
    remove(failure_path(stage))


def failure_path(stage) -> str:
    """Where a stage leaves the cause."""
    return f"{stage.stamp_path.removesuffix('.stamp')}.failure"


def _record(stage, failure):
    path = failure_path(stage)
    try:
        write_atomically(path, [json_bytes(failure._asdict())], synced=False)
    except SkykilnError:  # where nothing can be written, the cause is as a rule just that
        _unwritten[path] = failure
        print(failure.cause, file=sys.stderr, flush=True)


def _read(path):
    try:
        return Failure(**json.loads(bytes_of(path)))
    except (OSError, ValueError, TypeError):
        return None


def _failure(stage, error):
    if isinstance(error, SkykilnError):
        return Failure(stage.label, str(error), "")
    trace = "".join(traceback.format_exception(error))
    return Failure(stage.label, f"{type(error).__name__}: {error}", trace)
