"""Running a stage: read, make, put the outputs and then the stamp in place.

The order that makes a kill harmless: the inputs are checked once more; the outputs are written beside
and brought to the disk; the old stamp goes; the outputs appear, in the stage's order; the stamp appears.

A power cut may undo renames in any order. That is harmless too, and costs no more syncs: a stamp holds
size, time and digest of its outputs, so one that came back beside other bytes is not believed, and one
that is lost only makes its stage run again. Only for published files the folder is synced before the
last of them, probe.json, appears: readers have no stamps.
"""

import time
from datetime import UTC, datetime
from pathlib import Path

from ..errors import SkykilnError
from .atomic import remove, rename_into_place, sync_folder, write_beside
from .content import Input, chunks_of, keep_at_hand
from .digests import digest_chunks, digest_file
from .failures import recorded
from .stamps import OutputRecord, Stamp, read_stamp, write_stamp


def run_stage(stage, verdict):
    """Run a stage whose inputs are all up to date.

    Raises: SkykilnError for what the user can mend; the cause is left beside the stamp too
    """
    with recorded(stage):
        began = time.perf_counter()
        inputs = _inputs(stage, verdict)
        contents = stage.make(inputs)
        _check_inputs_stand(stage, verdict)
        outputs = _place(stage, contents)
        write_stamp(stage.stamp_path, _stamp(stage, verdict, outputs, time.perf_counter() - began))


def _inputs(stage, verdict):
    unready = [role for role, digest in verdict.inputs.items() if digest is None]
    if unready:
        raise SkykilnError(f"{stage.label}: {', '.join(unready)} is not up to date; bake again")
    inputs = {}
    for role, dependency in stage.requires().items():
        path = dependency.files()[dependency.output_role(role)]
        inputs[role] = Input(Path(path), verdict.inputs[role])
    return inputs


def _check_inputs_stand(stage, verdict):
    """What was read must still be what its maker's stamp says."""
    for role, dependency in stage.requires().items():
        stamp = read_stamp(dependency.stamp_path)
        if stamp is None or stamp.outputs[dependency.output_role(role)].digest != verdict.inputs[role]:
            raise SkykilnError(f"{stage.label}: {role} changed while it was read; bake again")


def _place(stage, contents):
    """Put all outputs in place; those whose bytes are equal stay untouched."""
    files = {role: Path(path) for role, path in stage.files().items()}
    records, fresh = {}, {}
    for role, path in files.items():
        chunks = chunks_of(contents[role])
        digest = digest_chunks(chunks)
        if not _holds(path, chunks, digest):
            fresh[role] = write_beside(path, chunks)
        # The time is that of the file written, not of whatever may stand in its place by now.
        records[role] = OutputRecord.of(path.name, digest, fresh.get(role, path).stat())
        if hasattr(contents[role], "dtype"):
            keep_at_hand(Input(path, digest), contents[role])
    _appear(stage, files, fresh)
    return records


def _appear(stage, files, fresh):
    superseded = stage.superseded()
    if fresh or superseded:
        remove(Path(stage.stamp_path))
    last = next(reversed(files))
    for role in [role for role in fresh if role != last]:
        rename_into_place(fresh[role], files[role])
    for old in superseded:
        remove(old)
    if last in fresh:
        if stage.published:
            sync_folder(files[last].parent)
        rename_into_place(fresh[last], files[last])


def _holds(path, chunks, digest):
    try:
        size = sum(memoryview(chunk).nbytes for chunk in chunks)
        return path.stat().st_size == size and digest_file(path) == digest
    except OSError:
        return False


def _stamp(stage, verdict, outputs, seconds):
    return Stamp(
        family=stage.get_task_family(),
        version=stage.version,
        settings=stage.settings(),
        inputs=verdict.inputs,
        outputs=outputs,
        reason="; ".join(verdict.reasons),
        seconds=round(seconds, 4),
        ended=datetime.now(UTC).isoformat(timespec="seconds"),
    )
