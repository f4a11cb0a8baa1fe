"""A night as plain text, at most a screenful: for a mail or a chat."""

import textwrap

from skykiln.quantities import percent, seconds_in_words, stops
from skykiln.report.findings import findings

SCREENFUL = 24  # lines
LONGEST_LINE = 100
_NAMED = 3  # cases of each finding that are told by name


def night_lines(record) -> list:
    """What a night did, what needs a person, what changed."""
    lines = [f"The night of {when(record)}", night_sentence(record), *_finding_lines(findings(record))]
    changed = sorted(_changed(record), key=lambda probe: -probe["change"]["mean"])
    told = [f"  {probe['name']}: {change_words(probe['change'])}" for probe in changed]
    lines += [f"Changed: {len(changed)}", *told] if changed else ["No pixel of what is published changed."]
    lines = [part for line in lines for part in _wrapped(line)]
    if len(lines) > SCREENFUL:
        lines[SCREENFUL - 1 :] = [f"... and {len(lines) - SCREENFUL + 1} lines more: see report/index.html"]
    return lines


def night_sentence(record) -> str:
    """How many probes, what became of them, how long it took."""
    totals = record["totals"]
    count = totals["probes"]
    states = ("rebuilt", "unchanged", "failed", "held")
    told = [f"{totals[state]:,} {state}" for state in states if totals[state]]
    parts = ", ".join(told) if told else "none asked for"
    held = " by gates" if totals["held"] else ""
    length = seconds_in_words(record["seconds"])
    return f"{count:,} probe{'' if count == 1 else 's'}: {parts}{held}. It took {length}."


def when(record) -> str:
    """Day and minute at which a night began, with its offset as recorded."""
    day, _, clock = record["started"].partition("T")
    zone = clock[8:].lstrip(".0123456789")
    return f"{day} {clock[:5]} {'UTC' if zone in ('Z', '+00:00') else zone}"


def change_words(change) -> str:
    """The change of a probe in a line."""
    largest = percent(change["largest"]) if change["largest"] < 10 else "over ten times"
    parts = [f"pixels {percent(change['mean'])} on average, {largest} at most"]
    light = change["illuminance"]
    if light["ratio"] is not None and abs(light["ratio"] - 1) >= 5e-5:
        parts.append(f"illuminance {percent(light['ratio'] - 1, signed=True)} ({stops(light['ratio'])})")
    moved = change["moved_deg"]
    if moved is not None and moved >= 0.05:
        parts.append(f"brightest spot moved {moved:.1f} degrees")
    if not change["source_changed"]:
        parts.append("its source did not change")
    return "; ".join(parts)


def _finding_lines(found):
    """A heading for each finding; names as long as all together leave room for what changed."""
    for finding in found:
        yield f"{finding.title}: {len(finding.cases)}"
        shown = finding.cases[: _NAMED if finding.urgent else 0]
        yield from (f"  {f'{name}: ' if name else ''}{text}" for name, text in shown)
        if finding.urgent and len(finding.cases) > len(shown):
            yield f"  and {len(finding.cases) - len(shown)} more"


def _changed(record):
    return [probe for probe in record["probes"] if probe.get("change")]


def _wrapped(line):
    """A line as two at most."""
    further = "    " if line[:1] == " " else ""
    return textwrap.wrap(line, LONGEST_LINE, subsequent_indent=further, max_lines=2, placeholder=" ...")
