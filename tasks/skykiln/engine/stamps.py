"""Stamps: the record beside an output of what produced it.

A stamp is removed before its outputs are replaced and written after, so a stamp that stands is true.
"""

import dataclasses
import json
import os
from collections import OrderedDict
from typing import NamedTuple

from .atomic import write_atomically
from .digests import bytes_of, digest_file

AT_HAND = 64  # stamps: those of the few probes at work
_at_hand: OrderedDict = OrderedDict()  # path -> (signature of the file, Stamp)


class OutputRecord(NamedTuple):
    """One output file as it was when its stamp was written; its path is relative to the stamp's folder."""

    file: str
    digest: str
    size: int
    mtime_ns: int

    @classmethod
    def of(cls, file: str, digest: str, status: os.stat_result):
        return cls(file, digest, status.st_size, status.st_mtime_ns)

    @property
    def seen(self) -> tuple:
        """Size and time."""
        return self.size, self.mtime_ns

    def fits(self, path, believed: bool = True) -> bool:
        """Whether the file still holds the recorded bytes.

        Parameters: believed : whether size and time may prove it; else the bytes are read
        Raises:     FileNotFoundError
        """
        status = os.stat(path)
        if believed and (status.st_size, status.st_mtime_ns) == self.seen:
            return True
        return status.st_size == self.size and digest_file(path) == self.digest


@dataclasses.dataclass(frozen=True)
class Stamp:
    """What made a stage's outputs.

    settings : the parameters that the stage's run reads
    inputs : role -> digest; outputs : role -> OutputRecord
    reason : the sentence why it ran; seconds : how long; ended : when, ISO 8601; night : in which
    on_disk : whether the outputs were on the disk when it was written; else, after a power cut, their
              size and time prove nothing
    void : empty, or why the stage must run again whatever the rest says
    """

    family: str
    version: int
    settings: dict
    inputs: dict
    outputs: dict
    reason: str
    seconds: float
    ended: str
    night: str
    on_disk: bool
    void: str = ""

    def to_bytes(self) -> bytes:
        outputs = {role: record._asdict() for role, record in self.outputs.items()}
        # On one line: a tenth of the time that indented JSON takes, and there are a dozen a probe.
        return json.dumps({**vars(self), "outputs": outputs}, ensure_ascii=False, allow_nan=False).encode()

    @classmethod
    def from_bytes(cls, data: bytes) -> "Stamp":
        """Raises: ValueError, TypeError or AttributeError when it isn't a stamp."""
        fields = json.loads(data)
        records = {role: OutputRecord(**record) for role, record in fields["outputs"].items()}
        return cls(**{**fields, "outputs": records})


def read_stamp(path) -> Stamp | None:
    """The stamp, or None when there is none that can be understood."""
    path = os.fspath(path)
    try:
        signature = _signature(path)
        known, stamp = _at_hand.get(path, (None, None))
        return stamp if known == signature else _read(path, signature)
    except (OSError, ValueError, TypeError, AttributeError, KeyError):
        return None


def write_stamp(path, stamp: Stamp):
    """Put a stamp in its place."""
    write_atomically(path, [stamp.to_bytes()], synced=False)


def void_stamp(path, why: str):
    """Make a stage run again, for the reason given; what it made before stays on record."""
    stamp = read_stamp(path)
    if stamp is not None:
        write_stamp(path, dataclasses.replace(stamp, void=why))


def _signature(path):
    """Tells one content of a stamp from another: each is a file of its own, renamed into the place."""
    status = os.stat(path)
    return status.st_ino, status.st_mtime_ns, status.st_size


def _read(path, signature):
    stamp = Stamp.from_bytes(bytes_of(path))
    _at_hand[path] = signature, stamp
    _at_hand.move_to_end(path)
    if len(_at_hand) > AT_HAND:
        _at_hand.popitem(last=False)
    return stamp
