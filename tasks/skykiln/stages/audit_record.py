"""What an audit found, as probe.json tells it, and in a sentence."""

import math

import numpy as np

from ..light.directions import FACE_AXES

CHANNELS = ("red", "green", "blue")
SOURCE = "the source"
UNCODED = "the filtered levels"
_MOST = 1e9  # that a share used is told as


def audit_record(charts, verdict, chains) -> dict:
    """The values of audit.json.

    Parameters: charts : those that were audited; verdict : Verdict
                chains : per kind of map the file that was audited (or UNCODED), and for each other one
                its name, the share it used of what is allowed beside the first, the share of its texels
    """
    files = [entry for finest, others in chains for entry in _files(finest, others, verdict)]
    record = {
        "passed": verdict.passed and all(entry["passed"] for entry in files),
        "why": "",
        "texels": verdict.texels,
        "samples": verdict.samples,
        "share_passed": _short(verdict.share_passed),
        "limit": _short(verdict.limit),
        "worst": _texel(charts, verdict.worst),
        "maps": [_map(charts, row) for row in verdict.charts],
        "files": files,
    }
    return {**record, "why": _sentence(record)}


def _files(finest, others, verdict):
    if finest != UNCODED:
        used = max(max(row["used"], row["worst"]["used"]) for row in verdict.charts)
        yield _file(finest, SOURCE, verdict.passed, verdict.share_passed, used)
    for file, used, share in others:
        yield _file(file, finest, used <= 1, share, used)


def _file(name, against, passed, share, used):
    used = _short(min(used, _MOST))
    return {"file": name, "against": against, "passed": passed, "share_passed": _short(share), "used": used}


def _map(charts, row):
    numbers = {key: _short(row[key]) for key in ("deviation", "z", "used")}
    worst = _texel(charts, row["worst"])
    return {"map": row["chart"], "texels": row["texels"], **numbers, "worst": worst}


def _texel(charts, found):
    """A texel's finding; irradiance as it is stored, not over pi."""
    factor = math.pi if found["chart"] == "irradiance" else 1.0
    size = next(chart for chart in charts if chart.name == found["chart"]).faces[0].shape[0]
    return {
        "map": found["chart"],
        "direction": _direction(size, found["face"], found["row"], found["column"]),
        "channel": CHANNELS[found["channel"]],
        "baked": _short(found["baked"] * factor),
        "estimate": _short(found["estimate"] * factor),
        **{key: _short(found[key]) for key in ("deviation", "z", "used")},
    }


def _sentence(record):
    """What is wrong; empty where nothing is."""
    if record["passed"]:
        return ""
    row = max(record["maps"], key=lambda row: max(row["used"], row["worst"]["used"]))
    if max(row["used"], row["worst"]["used"]) <= 1:
        return _apart(next(entry for entry in record["files"] if not entry["passed"]))
    passed = f"{100 * record['share_passed']:.4g} % of {record['texels']} texels pass"
    return f"{_off(row['worst']) if row['worst']['used'] > 1 else _off_in_the_mean(row)}; {passed}"


def _apart(entry):
    share = f"{100 * entry['share_passed']:.4g} % of its texels agree"
    return f"{entry['file']} is not what {entry['against']} holds: {share}"


def _off(texel):
    place = ", ".join(f"{x:.2f}" for x in texel["direction"])
    off = f"{texel['map']} is off by {100 * texel['deviation']:+.3g} % in {texel['channel']}"
    return f"{off} towards ({place}), {abs(texel['z']):.3g} standard errors"


def _off_in_the_mean(row):
    of_all = row["map"] == "all"
    off = f"{'all maps are' if of_all else row['map'] + ' is'} off by {100 * row['deviation']:+.3g} %"
    return f"{off} in the mean, {abs(row['z']):.3g} standard errors"


def _direction(size, face, row, column):
    """World direction of a texel's centre."""
    a, b = (2.0 * column + 1.0) / size - 1.0, (2.0 * row + 1.0) / size - 1.0
    vector = FACE_AXES[face, 0] + a * FACE_AXES[face, 1] + b * FACE_AXES[face, 2]
    return [round(float(x), 4) for x in vector / np.linalg.norm(vector)]


def _short(number):
    return float(f"{number:.5g}")
