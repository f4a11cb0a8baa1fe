"""The one place that decides whether a stage is up to date, with a sentence for every reason."""

import os
from typing import NamedTuple

from .differences import setting_reasons
from .stamps import Stamp, read_stamp

UP_TO_DATE = "up to date"
WILL_RUN = "will run"
UNREADABLE = "unreadable"  # how the pin of a file begins that can't be read
MAY_RUN = "may run"  # what it reads is to be made anew, and may come out as it was
HELD = "held"  # would run, but something forbids it; what it made before stays


class Trust(NamedTuple):
    """When size and time of an output may stand for its bytes.

    files : (path, size, time in ns) of outputs that are known to be on the disk
    stamps : whether stamps are believed that say so of theirs
    """

    files: frozenset = frozenset()
    stamps: bool = True


BY_STAMPS = Trust()


class Verdict(NamedTuple):
    """Whether a stage must run.

    stage : the stage that was judged
    state : UP_TO_DATE, WILL_RUN, MAY_RUN or HELD
    reasons : sentences, one for each cause, or for each that forbids it; empty when up to date
    inputs : role -> digest as it stands now, None where the maker of the input is itself stale
    stamp : the stage's stamp, None if there is none
    """

    stage: object
    state: str
    reasons: tuple
    inputs: dict
    stamp: Stamp | None

    @property
    def up_to_date(self) -> bool:
        return self.state == UP_TO_DATE

    @property
    def settled(self) -> bool:
        """Whether a bake has nothing to do here."""
        return self.state in (UP_TO_DATE, HELD)


def staleness(stage, memo: dict, trust: Trust = BY_STAMPS) -> Verdict:
    """Judge a stage, and everything below it.

    Parameters: memo : verdicts of this question by stamp path; filled on the way, so that a stage
                       reached on two ways is judged once. What is read comes before what reads it.
    """
    path = stage.stamp_path
    known = memo.get(path)
    if known is None:
        known = memo[path] = _verdict(stage, memo, trust)
    return known


def _verdict(stage, memo, trust):
    required, pins = stage.below, stage.pins()
    inputs = dict(pins)
    for role, dependency in required.items():
        below = staleness(dependency, memo, trust)
        known = below.stamp.outputs[dependency.output_role(role)] if below.up_to_date else None
        inputs[role] = known and known.digest
    stamp = read_stamp(stage.stamp_path)
    words = _input_words(pins, required)
    reasons = tuple(_reasons(stage, stamp, inputs, words, trust))
    if reasons:
        held = stage.held_by() if None not in inputs.values() else ()
        return Verdict(stage, HELD if held else WILL_RUN, held or reasons, inputs, stamp)
    waiting = list(dict.fromkeys(words[role] for role, digest in inputs.items() if digest is None))
    if waiting:
        return Verdict(stage, MAY_RUN, (f"runs if {_listed(waiting)} changes",), inputs, stamp)
    return Verdict(stage, UP_TO_DATE, (), inputs, stamp)


def _reasons(stage, stamp, inputs, words, trust):
    if stamp is None:
        begun = any(map(os.path.exists, stage.paths.values()))
        yield "its last run did not end" if begun else "was never baked"
    elif stamp.void:
        yield stamp.void
    elif stamp.family != stage.get_task_family():
        yield f"was made by another stage, {stamp.family}"
    else:
        yield from _version_reasons(stage, stamp)
        yield from setting_reasons(stamp.settings, stage.settings())
        yield from dict.fromkeys(_input_reasons(stamp.inputs, inputs, words))
        yield from _output_reasons(stamp, stage.paths, trust)


def _version_reasons(stage, stamp):
    if stamp.version != stage.version:
        yield f"its code's version was {stamp.version}, is {stage.version}"


def _input_words(pins, required):
    """Role -> what a user calls an input: the title of the stage that makes it."""
    words = {role: _words(role) for role in pins}
    return words | {role: below.title for role, below in required.items()}


def _input_reasons(recorded, inputs, words):
    for role, digest in inputs.items():
        if role not in recorded:
            yield f"{words[role]} is a new input"
        elif digest is not None and digest != recorded[role]:
            news = f"is {digest}" if digest.startswith(UNREADABLE) else "changed"
            yield f"{words[role]} {news}"
    for role in recorded:
        if role not in inputs:
            yield f"{_words(role)} is no longer an input"


def _output_reasons(stamp, files, trust):
    if stamp.outputs.keys() != files.keys():
        yield "its outputs are other ones now"
        return
    for role, record in stamp.outputs.items():
        seen = (files[role], *record.seen)
        try:
            fits = record.fits(files[role], trust.stamps and (stamp.on_disk or seen in trust.files))
        except OSError:
            yield f"{os.path.basename(record.file)} is missing"
        else:
            if not fits:
                yield f"{os.path.basename(record.file)} was changed by something else"


def _words(role):
    return role.replace("_", " ")


def _listed(words):
    return " or ".join(part for part in (", ".join(words[:-1]), words[-1]) if part)
