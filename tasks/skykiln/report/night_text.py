"""A night as plain text, at most a screenful: for a mail or a chat."""

import textwrap

from skykiln.report.findings import findings
from skykiln.report.quantities import change_words, seconds_in_words

SCREENFUL = 24  # lines
LONGEST_LINE = 100
_NAMED = 3  # cases of each finding that are told by name


def night_lines(record) -> list:
    """What a night did, what needs a person, what changed."""
    lines = [*_wrapped(night_sentence(record)), *_finding_lines(findings(record))]
    changed = sorted(_changed(record), key=lambda probe: -probe["change"]["mean"])
    room = SCREENFUL - len(lines) - 2
    if changed and room > 0:
        lines.append(f"Changed: {len(changed)}")
        lines += [_cut(f"  {probe['name']}: {change_words(probe['change'])}") for probe in changed[:room]]
        if len(changed) > room:
            lines.append(f"  and {len(changed) - room} more")
    return lines


def night_sentence(record) -> str:
    """How many probes, what became of them, how long it took."""
    totals = record["totals"]
    count = totals["probes"]
    states = ("rebuilt", "unchanged", "failed", "held")
    told = [f"{totals[state]} {state}" for state in states if totals[state]]
    parts = ", ".join(told) if told else "none asked for"
    held = " by gates" if totals["held"] else ""
    length = seconds_in_words(record["seconds"])
    return f"{count} probe{'' if count == 1 else 's'}: {parts}{held}. It took {length}, from {when(record)}."


def when(record) -> str:
    """Day and minute at which a night began, with its offset as recorded."""
    day, _, clock = record["started"].partition("T")
    zone = clock[8:].lstrip(".0123456789")
    return f"{day} {clock[:5]} {'UTC' if zone in ('Z', '+00:00') else zone}"


def _finding_lines(found):
    """A heading for each finding; names as long as all together leave room for what changed."""
    for finding in found:
        yield f"{finding.title}: {len(finding.cases)}"
        shown = finding.cases[: _NAMED if finding.urgent else 0]
        yield from (_cut(f"  {f'{name}: ' if name else ''}{text}") for name, text in shown)
        if finding.urgent and len(finding.cases) > len(shown):
            yield f"  and {len(finding.cases) - len(shown)} more"


def _changed(record):
    return [probe for probe in record["probes"] if probe.get("change")]


def _cut(line):
    line = line.replace("\n", " ")
    return line if len(line) <= LONGEST_LINE else f"{line[: LONGEST_LINE - 3]}..."


def _wrapped(sentence):
    return textwrap.wrap(sentence, LONGEST_LINE)
