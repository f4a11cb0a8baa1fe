"""Chains in words, for `plan` and `why`, and as JSON."""

import os
from collections import Counter

from ..quantities import bytes_in_words
from .failures import read_failure
from .night import STATES
from .staleness import HELD, MAY_RUN, UP_TO_DATE, WILL_RUN


def plan_lines(chains):
    """A line for every stage that would run and why, for every one that is held, and the count of all."""
    for chain in chains:
        yield from _lines(chain)
    states = Counter(verdict.state for chain in chains for verdict in chain.verdicts)
    states[UP_TO_DATE] += sum(chain.sealed for chain in chains)
    held = f", {states[HELD]} held" if states[HELD] else ""
    yield f"{states[WILL_RUN]} will run, {states[MAY_RUN]} may run, {states[UP_TO_DATE]} up to date{held}"


def _lines(chain):
    """A line per stage that isn't up to date, or one for all when all would run for the same reason."""
    whole = {(verdict.state, verdict.reasons) for verdict in chain.verdicts}
    if len(whole) == 1 < len(chain.stale):
        state, reasons = whole.pop()
        yield f"{state}: all {len(chain.verdicts)} stages of {chain.target.owner}: {'; '.join(reasons)}"
        return
    for verdict in [verdict for verdict in chain.verdicts if not verdict.up_to_date]:
        yield f"{verdict.state}: {verdict.stage.label}: {'; '.join(verdict.reasons)}"


def plan_record(chains) -> list:
    """The state of every stage of every chain."""
    return [{"name": chain.target.owner, "stages": [_entry(v) for v in chain.verdicts]} for chain in chains]


def _entry(verdict):
    return {"stage": verdict.stage.label, "state": verdict.state, "reasons": list(verdict.reasons)}


def why_lines(chains, root):
    """For every stage when and why it ran last, and why it would run next.

    Parameters: root : folder that paths are told relative to
    """
    for chain in chains:
        for verdict in chain.verdicts:
            yield f"{verdict.stage.label}: {_last_run(verdict.stamp)}"
            if not verdict.up_to_date:
                yield f"    {verdict.state}: {'; '.join(verdict.reasons)}"
                failure = read_failure(verdict.stage)
                if failure:
                    yield f"    failed last time: {failure.cause.replace(f'{root}/', '')}"


def night_sentence(record: dict) -> str:
    """What a night did, in a line: from the values of night.json."""
    totals = record["totals"]
    told = ", ".join(f"{totals[state]} {state}" for state in STATES if totals[state] or state != HELD)
    return f"{told}; {record['stages_run']} stages ran in {record['seconds']:.1f} s"


def unheld_audits(record: dict):
    """A line for every probe that failed its audit and that no gate holds: from the values of night.json."""
    for probe in record["probes"]:
        audit = probe["audit"]
        if audit and not audit["passed"] and probe["state"] != HELD and not probe["accepted"]:
            yield f"{probe['name']}: audit: {audit['why']}"


def _last_run(stamp):
    if stamp is None:
        return "no finished run on record"
    return f"ran {stamp.ended} ({stamp.seconds:.2f} s): {stamp.reason}"


def prune_lines(found, root, dry_run: bool):
    """A line for every file that goes, every one that stays because it was changed, and the count.

    Parameters: found : Leftovers; root : folder that paths are told relative to
    """
    outputs = [path for leftover in found for path in leftover.outputs]
    for path in outputs:
        yield f"{'would remove' if dry_run else 'removed'}: {os.path.relpath(path, root)}"
    for path in [path for leftover in found for path in leftover.kept]:
        yield f"kept: {os.path.relpath(path, root)}: was changed by something else"
    size = bytes_in_words(sum(path.stat().st_size for path in outputs))
    yield f"{len(outputs)} files, {size}, {'would be ' if dry_run else ''}removed"
