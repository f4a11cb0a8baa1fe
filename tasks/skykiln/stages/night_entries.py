"""The entries of night.json: what became of a probe, what stands published of it, how it changed."""

from pathlib import Path

from ..engine.digests import read_json
from ..engine.staleness import HELD
from .judge_probe import JudgeProbe, read_change, read_judgement


def night_entry(outcome, root) -> dict:
    """A probe's entry.

    Parameters: root : folder that paths are told relative to
    """
    target, stages = outcome.target, outcome.stages()
    failure = outcome.failure and {
        "file": target.probe.file,
        "stage": outcome.failure.stage,
        "cause": outcome.failure.cause.replace(f"{root}/", ""),
    }
    judged = any(ran["stage"] == JudgeProbe.title for ran in stages)
    change = read_change(target.pinned) if outcome.state == HELD or judged else None
    return _entry(target, outcome.state, stages, failure, change)


def standing_entry(target) -> dict:
    """The entry of a probe that a night was not asked for."""
    return _entry(target, "not asked for", [], None, None)


def _entry(target, state, stages, failure, change):
    record = read_json(Path(target.pinned.published) / "probe.json")
    judgement = read_judgement(target.pinned)
    return {
        "name": target.owner,
        "state": state,
        "recipe": target.probe.recipe,
        "stages": stages,
        "failure": failure,
        "gates": [] if failure else judgement["broken"],
        "audit": None if failure else judgement["audit"],
        "accepted": not failure and judgement["accepted"] and bool(judgement["broken"]),
        "bytes": record.get("bytes"),
        "light": _light(record),
        "change": change,
    }


def _light(record):
    """What a person compares of a published probe; None if nothing is, or if another skykiln wrote it."""
    try:
        energy, seams = record["energy"], [level["seam"] for level in record["specular"]["levels"][1:]]
        return {
            "units": record["units"],
            "mean_luminance": energy["mean_luminance"],
            "horizontal_illuminance": energy["horizontal_illuminance"],
            "mean_radiance": energy["mean_radiance"],
            "brightest": energy["brightest"],
            "sun": record["sun"] and {key: record["sun"][key] for key in ("direction", "illuminance")},
            "lost_to_clamping": energy["lost_to_clamping"],
            "warnings": record["source"]["warnings"],
            "repaired": sum(n for n in record["source"]["repaired"].values() if type(n) is int),
            "sh_smallest": record["irradiance"]["sh_smallest"],
            "seam": max((seam for seam in seams if seam is not None), default=None),
        }
    except (KeyError, TypeError):
        return None
