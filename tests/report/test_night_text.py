"""A night in words: what is urgent comes first, and all of it fits a screen."""

from nights import entry, night, troubled_night

from skykiln.report.findings import findings
from skykiln.report.night_text import LONGEST_LINE, SCREENFUL, night_lines, night_sentence


def test_sentence_counts_what_became_of_the_probes():
    assert night_sentence(troubled_night()) == (
        "6 probes: 1 rebuilt, 3 unchanged, 1 failed, 1 held by gates. It took 75 s."
    )


def test_findings_name_their_probes_and_the_urgent_ones_come_first():
    found = {finding.title: finding for finding in findings(troubled_night())}
    assert list(found) == [
        "Failed",
        "Held by a gate",
        "Audit out of tolerance",
        "Warnings about the source",
        "Light lost",
        "Pixels repaired",
        "Harmonics below zero",
    ]
    assert found["Failed"].cases == [("pier", "pier.exr: the file ends early")]
    assert found["Held by a gate"].cases[0][0] == "quay"
    assert found["Audit out of tolerance"].cases == [("hall", "level 1 is 9 % off")]
    assert found["Warnings about the source"].cases == [("lamp", "its sun is clipped")]
    assert found["Light lost"].cases == [("lamp", "25 % of the flux")]
    assert found["Pixels repaired"].cases == [("lamp", "3 pixels")]
    urgency = [finding.urgent for finding in found.values()]
    assert urgency == sorted(urgency, reverse=True)


def test_a_night_without_trouble_has_no_findings():
    assert findings(night(entry("roof"))) == []


def test_text_tells_the_greatest_change_first_in_percent_stops_and_degrees():
    lines = night_lines(troubled_night())
    assert lines[0] == "The night of 2031-05-01 02:00 UTC"
    changed = lines[lines.index("Changed: 2") + 1 :]
    told = "  ferry: pixels 40 % on average, 50 % at most; illuminance +100 % (+1.00 EV)"
    assert changed[0].startswith(told)
    assert changed[1] == "    3.2 degrees; its source did not change"
    assert changed[2].startswith("  quay: ")


def test_text_of_the_worst_night_fits_a_screen():
    failure = {"file": "a.exr", "stage": "panorama", "cause": "x" * 300 + "\n" + "y" * 300}
    some = [entry(f"probe_{i}", state="failed", failure=failure, change=None) for i in range(40)]
    changed = troubled_night()["probes"][2]["change"]
    others = [entry(f"other_{i}", state="rebuilt", change=changed) for i in range(60)]
    lines = night_lines(night(*some, *others))
    assert len(lines) == SCREENFUL
    assert max(map(len, lines)) <= LONGEST_LINE
    assert "\n" not in "".join(lines)
    assert "  and 37 more" in lines
    assert lines[-1].startswith("... and ")
