"""The pages of a night, from the values of night.json and probe.json. Names and texts are escaped."""

import functools
import math
import shlex
from pathlib import Path
from urllib.parse import quote

import jinja2

from skykiln.quantities import amount, bytes_in_words, percent
from skykiln.report.findings import findings
from skykiln.report.night_text import change_words, night_sentence, when
from skykiln.report.probe_pictures import DIFFERENCE_RANGE
from skykiln.report.ramp import css_gradient

MOST_CHANGED = 30  # with a picture on the first page
STATIC = ("report.css", "table.js")  # beside the first page
_TEMPLATES = Path(__file__).with_name("templates")
_RANKS = {"failed": 0, "held": 1, "rebuilt": 2, "unchanged": 3}


def static_file(name) -> bytes:
    return (_TEMPLATES / name).read_bytes()


def index_page(record, before, others, pictured, paged) -> bytes:
    """The first page.

    Parameters: record, before : values of this night and of the one before, None if there is none
                others : entries of probes that this night was not asked for
                pictured, paged : names of probes that have a small picture, a page
    """
    entries = sorted([*record["probes"], *others], key=lambda entry: entry["name"])
    rows = [_row(place, entry, pictured, paged) for place, entry in enumerate(entries)]
    changed = sorted((row for row in rows if row["change"]), key=lambda row: -row["change"]["mean"])
    return _page(
        "index.html",
        record=record,
        when=when(record),
        before=before and when(before),
        sentence=night_sentence(record),
        findings=findings(record),
        membership=list(_membership(record, before, others)),
        changed=changed,
        most_changed=MOST_CHANGED,
        rows=rows,
        by_name={row["name"]: row for row in rows},
    )


def probe_page(record, entry, probe, looks) -> bytes:
    """A probe's page, beside its pictures.

    Parameters: record : values of night.json; entry : the probe's in it
                probe : values of the probe.json that the pictures show, {} if there is none
                looks : numbers about its pictures
    """
    return _page(
        "probe.html",
        **{key: entry[key] for key in ("name", "state", "failure", "gates", "accepted", "change", "stages")},
        up="../" * (2 + entry["name"].count("/")),
        when=when(record),
        probe=probe,
        panorama=probe and "panorama_size" in looks and _panorama(probe, looks),
        numbers=_numbers(probe) if probe else [],
        levels=list(_levels(probe)) if probe else [],
        scene=probe and "scene_difference" in looks and _scene(probe, looks),
        files=_files(probe) if probe else [],
    )


def _files(probe):
    kinds = (probe[kind] for kind in ("specular", "irradiance", "sheen") if kind in probe)
    return [file for kind in kinds for file in kind["files"]]


def folder_url(name) -> str:
    """Where a probe's folder lies, from the first page."""
    return f"probes/{quote(name)}"


def _row(place, entry, pictured, paged):
    name, light = entry["name"], entry["light"] or {}
    return {
        "place": place,
        "name": name,
        "state": entry["state"],
        "rank": _RANKS.get(entry["state"], 4),
        "recipe": entry["recipe"],
        "words": f"{name} {entry['recipe']} {entry['state']}".lower(),
        "folder": folder_url(name),
        "pictured": name in pictured,
        "paged": name in paged,
        "change": entry["change"],
        "illuminance": light.get("horizontal_illuminance", ""),
        "brightest": light.get("brightest", {}).get("luminance", ""),
        "absolute": light.get("units") == "cd/m2",
        "disk": entry["bytes"]["disk"] if entry["bytes"] else "",
    }


def _membership(record, before, others):
    """Sentences about probes that came, went, or recovered."""
    if before is None:
        return
    now = {entry["name"]: entry for entry in [*record["probes"], *others]}
    then = {entry["name"]: entry for entry in before["probes"]}
    yield from _listed("New", sorted(now.keys() - then.keys()) if not others else [])
    yield from _listed("No longer asked for", sorted(then.keys() - now.keys()))
    well = [
        name
        for name, entry in now.items()
        if name in then and then[name]["state"] == "failed" and entry["state"] in ("rebuilt", "unchanged")
    ]
    yield from _listed("Recovered", well)


def _listed(what, names):
    if names:
        more = f" and {len(names) - 8} more" if len(names) > 8 else ""
        yield f"{what}: {', '.join(names[:8])}{more}."


def _panorama(probe, looks):
    low, high = looks["luminance_range"]
    direction, what = looks["brightest"]["direction"], "the brightest spot"
    if probe["sun"]:
        direction, what = probe["sun"]["direction"], "the sun, which is a light of its own"
    x, y, z = direction
    longitude, height = math.atan2(x, z), math.asin(max(-1.0, min(1.0, y)))
    absolute = probe["units"] == "cd/m2"
    return {
        "size": looks["panorama_size"],
        "low": amount(low),
        "high": amount(high),
        "unit": "cd/m2" if absolute else "(relative)",
        "stops": round(math.log2(high / low)),
        "mark": {
            "what": what,
            "words": _heading(longitude, height),
            "x": round(100 * (0.5 - longitude / (2 * math.pi)), 2),
            "y": round(100 * (0.5 - height / math.pi), 2),
        },
    }


def _levels(probe):
    """Levels, each with how far its audit found it off in the mean, None where it was not audited alone."""
    maps = (probe.get("audit") or {}).get("maps", ())
    off = {row["map"]: row["deviation"] for row in maps}
    for level in probe["specular"]["levels"]:
        yield {**level, "off": off.get(f"level {level['level']}")}


def _heading(longitude, height):
    return f"longitude {math.degrees(longitude):.1f}, height {math.degrees(height):.1f} degrees"


def _scene(probe, looks):
    first = min(file["file"] for file in probe["specular"]["files"])
    return {"file": first, **looks["scene_difference"]}


def _numbers(probe):
    """Pairs of a label and a value with its unit."""
    energy, source, absolute = probe["energy"], probe["source"], probe["units"] == "cd/m2"
    lux, luminance = (" lx", " cd/m2") if absolute else ("", "")
    yield "Illuminance, level surface", f"{amount(energy['horizontal_illuminance'])}{lux}"
    yield "Mean radiance, r g b", " ".join(amount(value) for value in energy["mean_radiance"])
    yield "Brightest", f"{amount(energy['brightest']['luminance'])}{luminance}"
    sun = probe["sun"]
    if sun:
        radius = f"radius {sun['angular_radius_deg']:.3g} degrees"
        yield "Sun, facing it", f"{amount(sun['illuminance'])}{lux}, {radius}"
    yield "Source", f"{source['file']}, {source['width']} x {source['height']}"
    by = ", ".join(source.get("calibrated_by", ()))
    yield "Scaled by", f"{amount(source['scale'])}{f', from {by}' if by else ''}"
    yield "Recipe", probe["recipe"]
    yield "storage_ev", str(probe["storage_ev"])
    sizes = (bytes_in_words(probe["bytes"][kind]) for kind in ("disk", "gpu"))
    yield "On disk, on the GPU", ", ".join(sizes)
    yield "Pixels repaired", amount(_repaired(source["repaired"]))
    yield "Light lost to clamping", percent(energy["lost_to_clamping"])
    yield "Harmonics, smallest", amount(probe["irradiance"]["sh_smallest"])


    if source.get("warnings"):
        yield "Warnings", "; ".join(source["warnings"])
    audit = probe.get("audit")
    if audit:
        worst, share = audit["worst"], percent(audit["share_passed"])
        told = f"worst {percent(abs(worst['deviation']))} at {worst['map']}, z {abs(worst['z']):.1f}"
        yield "Audit", f"{audit['why'] or 'passed'}; {share} of {audit['texels']} texels within; {told}"


def _repaired(counts):
    return sum(value for value in counts.values() if type(value) is int)


def _page(template, **values) -> bytes:
    shared = {"difference_range": DIFFERENCE_RANGE, "ramp": css_gradient()}
    return _environment().get_template(template).render(**shared, **values).encode()


@functools.cache
def _environment():
    environment = jinja2.Environment(
        loader=jinja2.FileSystemLoader(_TEMPLATES),
        autoescape=True,
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    environment.filters |= {
        "amount": amount,
        "bytes": bytes_in_words,
        "change": change_words,
        "percent": percent,
        "shell": shlex.quote,
    }
    return environment
