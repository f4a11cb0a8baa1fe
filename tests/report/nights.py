"""A night's record with one of everything, for pages and texts."""

import copy

CHANGE = {
    "levels": [{"largest": 0.5, "mean": 0.01}, {"largest": 0.1, "mean": 0.02}],
    "largest": 0.5,
    "mean": 0.02,
    "illuminance": {"before": 1000.0, "after": 2000.0, "ratio": 2.0},
    "moved_deg": 3.25,
    "source_changed": True,
}
LIGHT = {
    "units": "cd/m2",
    "horizontal_illuminance": 98000.0,
    "mean_radiance": [1.0, 1.0, 1.0],
    "brightest": {"direction": [0.0, 0.6, 0.8], "luminance": 8.0e8},
    "sun": None,
    "lost_to_clamping": 0.0,
    "warnings": [],
    "repaired": 0,
    "sh_smallest": 0.5,
    "seam": 1.1,
}
AUDIT = {"passed": True, "why": "", "texels": 200, "share_passed": 1.0, "worst": {"map": "level 1"}}


def entry(name, **differing):
    """A probe's entry."""
    plain = {
        "name": name,
        "state": "unchanged",
        "recipe": "landmark",
        "stages": [],
        "failure": None,
        "gates": [],
        "audit": AUDIT,
        "accepted": False,
        "bytes": {"disk": 2048, "gpu": 4096},
        "light": LIGHT,
        "change": None,
    }
    return copy.deepcopy({**plain, **differing})


def night(*entries, **differing):
    """A night's record of some entries."""
    states = [each["state"] for each in entries]
    counts = {state: states.count(state) for state in ("rebuilt", "unchanged", "held", "failed")}
    return {
        "started": "2031-05-01T02:00:00.123+00:00",
        "seconds": 75.2,
        "totals": {"probes": len(entries), **counts},
        "bytes": {"disk": 4096, "gpu": 8192},
        "gates": [],
        "stages_run": 3,
        "probes": list(entries),
        **differing,
    }


def troubled_night():
    """One failed, one held, one changed, one with lost light and repaired pixels, one well."""
    gate = {"gate": "change.mean", "why": "the pixels changed by 2 %, the limit is 1 %"}
    failure = {"file": "pier.exr", "stage": "panorama of pier", "cause": "pier.exr: the file ends early"}
    worn = {**LIGHT, "lost_to_clamping": 0.25, "repaired": 3, "sh_smallest": -0.5}
    worn["warnings"] = ["its sun is clipped"]
    return night(
        entry("pier", state="failed", failure=failure, audit=None),
        entry("quay", state="held", gates=[gate], change=CHANGE),
        entry("ferry", state="rebuilt", change={**CHANGE, "source_changed": False, "mean": 0.4}),
        entry("lamp", light=worn),
        entry("roof"),
        entry("hall", audit={**AUDIT, "passed": False, "why": "level 1 is 9 % off"}),
    )
