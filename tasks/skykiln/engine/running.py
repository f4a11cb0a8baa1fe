"""Running a stage: read, make, put the outputs and then the stamp in place.

The order that makes a kill harmless: the inputs are checked once more; the outputs are written beside;
the old stamp and the seal go; the outputs appear, in the stage's order; the stamp appears. Of published
files the last, which tells of the others, goes before them and comes after them.

And a power cut: outputs are brought to the disk before they appear, and the names of published ones
before their stamp. Intermediates that a lot makes are not; their stamps say so, and only their bytes are
believed until a seal vouches for them. What a cut may undo costs a rerun: a stamp holds size, time and
digest of its outputs, so one that came back beside other bytes is not believed.
"""

import os
import time
from datetime import UTC, datetime
from typing import NamedTuple

from ..errors import SkykilnError
from .atomic import remove, rename_into_place, sync_folder, write_beside
from .content import Input, chunks_of, keep_at_hand
from .digests import digest_chunks, digest_file
from .failures import recorded
from .relative import relative_to
from .seals import break_seal
from .staleness import UP_TO_DATE, Verdict
from .stamps import OutputRecord, Stamp, read_stamp, write_stamp


class Written(NamedTuple):
    """A stage that has run, whose new outputs still lie beside their places.

    verdict : why it ran; fresh : role -> file beside; records : role -> OutputRecord, all roles
    on_disk : whether the outputs were brought to the disk one by one
    """

    stage: object
    verdict: Verdict
    fresh: dict
    records: dict
    seconds: float
    on_disk: bool


def run_stage(stage, verdict, on_disk: bool = True) -> Verdict:
    """Run a stage whose inputs are all up to date.

    Parameters: on_disk : whether its outputs have to outlive a power cut
    Returns:    the verdict about it now
    Raises:     SkykilnError for what the user can mend; the cause is left beside the stamp too
    """
    with recorded(stage):
        written = write_outputs(stage, verdict, on_disk)
        put_in_place(written)
        if stage.published:
            for folder in {os.path.dirname(stage.paths[role]) for role in written.fresh}:
                sync_folder(folder)
        return certify(written)


def write_outputs(stage, verdict, on_disk: bool) -> Written:
    """Make the outputs, and write those beside their places whose bytes are not there yet."""
    began = time.perf_counter()
    contents = stage.make(inputs_of(stage, verdict))
    _check_inputs_stand(stage, verdict)
    records, fresh, folder = {}, {}, os.path.dirname(stage.stamp_path)
    try:
        for role, path in stage.paths.items():
            digest = _write_beside(path, role, contents[role], fresh, on_disk)
            # The time is that of the file written, not of whatever may stand in its place by now.
            status = os.stat(fresh.get(role, path))
            records[role] = OutputRecord.of(relative_to(folder, path), digest, status)
    except BaseException:
        for beside in fresh.values():
            remove(beside)
        raise
    return Written(stage, verdict, fresh, records, time.perf_counter() - began, on_disk)


def put_in_place(written: Written):
    """Let the outputs appear."""
    stage, fresh, files = written.stage, written.fresh, written.stage.paths
    superseded, last = stage.superseded(), next(reversed(files))
    break_seal(stage)
    if fresh or superseded:
        remove(stage.stamp_path)
    if stage.published and last in fresh:
        remove(files[last])
    for role in [role for role in fresh if role != last]:
        rename_into_place(fresh[role], files[role])
    for old in superseded:
        remove(old)
    if last in fresh:
        rename_into_place(fresh[last], files[last])


def certify(written: Written, on_disk: bool = False) -> Verdict:
    """Write the stamp.

    Parameters: on_disk : whether everything has been brought to the disk since the outputs appeared
    """
    stage, verdict = written.stage, written.verdict
    stamp = Stamp(
        family=stage.get_task_family(),
        version=stage.version,
        settings=stage.settings(),
        inputs=verdict.inputs,
        outputs=written.records,
        reason="; ".join(verdict.reasons),
        seconds=round(written.seconds, 4),
        ended=datetime.now(UTC).isoformat(timespec="seconds"),
        night=stage.night,
        on_disk=on_disk or written.on_disk,
    )
    write_stamp(stage.stamp_path, stamp)
    return Verdict(stage, UP_TO_DATE, (), verdict.inputs, stamp)


def inputs_of(stage, verdict) -> dict:
    """Role -> Input of what a stage reads from other stages.

    Raises: SkykilnError naming what is not up to date
    """
    unready = [role for role, digest in verdict.inputs.items() if digest is None]
    if unready:
        raise SkykilnError(f"{stage.label}: {', '.join(unready)} is not up to date; bake again")
    inputs = {}
    for role, dependency in stage.below.items():
        path = dependency.paths[dependency.output_role(role)]
        inputs[role] = Input(path, verdict.inputs[role])
    return inputs


def _check_inputs_stand(stage, verdict):
    """What was read must still be what its maker's stamp says."""
    stamps = {}
    for role, dependency in stage.below.items():
        path = dependency.stamp_path
        stamp = stamps[path] = stamps[path] if path in stamps else read_stamp(path)
        if stamp is None or stamp.outputs[dependency.output_role(role)].digest != verdict.inputs[role]:
            raise SkykilnError(f"{stage.label}: {role} changed while it was read; bake again")


def _write_beside(path, role, content, fresh, on_disk):
    """Digest of an output; its file beside goes into `fresh` unless the bytes are there already."""
    chunks = chunks_of(content)
    digest = digest_chunks(chunks)
    if not _holds(path, chunks, digest):
        fresh[role] = write_beside(path, chunks, synced=on_disk)
    if hasattr(content, "dtype"):
        keep_at_hand(Input(path, digest), content)
    return digest


def _holds(path, chunks, digest):
    try:
        size = sum(memoryview(chunk).nbytes for chunk in chunks)
        return os.stat(path).st_size == size and digest_file(path) == digest
    except OSError:
        return False
