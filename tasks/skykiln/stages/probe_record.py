"""The values of probe.json, from the settings of JudgeProbe and the facts of the stages before it."""

from ..light.calibration import CAUTION

TOTALS = ("mean_radiance", "mean_luminance", "level_irradiance", "horizontal_illuminance")


def probe_record(settings, packed_names, inputs) -> dict:
    """What probe.json holds.

    Parameters: settings : those of JudgeProbe; packed_names : name of the pack -> names of its files
                inputs : role -> Input
    """
    facts, totals = inputs["facts"].json(), inputs["totals"].json()
    units = inputs["light"].json()["units"]
    # What a limit took: from the sky that is left where the sun was taken out, else from the whole.
    sun = inputs["sun"].json() if "sun" in inputs else {"sun": None, "limited": facts["limited"]}
    packs = {name: inputs[f"{name}.json"].json() for name in packed_names}
    shared = next(iter(packs.values()))
    files = {name: facts for pack in packs.values() for name, facts in pack["files"].items()}
    kinds = ("specular", "irradiance", *(["sheen"] if settings["sheen_roughness"] else []))
    listed = {kind: _files(settings, packed_names, inputs, files, kind) for kind in kinds}
    return {
        "schema": 1,
        "name": settings["name"],
        "source": _source(settings, facts, sun["sun"]),
        "recipe": settings["recipe"],
        "extra": settings["extra"],
        "cube_axes": settings["cube_axes"],
        "units": units,
        "primaries": facts["colour"]["working"],
        "caution": CAUTION if units == "cd/m2" else None,
        "storage_ev": shared["storage_ev"],
        "specular": {
            "levels": _levels(settings["roughness"], shared["face_sizes"], [files[name] for name in packs]),
            "files": listed["specular"],
        },
        "irradiance": {
            "face_size": shared["irradiance_face_size"],
            "files": listed["irradiance"],
            **{key: totals[key] for key in ("sh", "sh_smallest", "sh_window")},
        },
        **({"sheen": _sheen(settings, files, listed["sheen"])} if "sheen" in kinds else {}),
        "sun": sun["sun"],
        "energy": {
            **{key: totals[key] for key in TOTALS},
            "brightest": inputs["looks"].json()["brightest"],
            "limited": sun["limited"],
            "lost_to_clamping": max(pack["lost_to_clamping"] for pack in packs.values()),
        },
        "bytes": _bytes(settings["packs"], listed),
        "audit": inputs["audit"].json(),
    }


def _source(settings, facts, sun):
    told = {key: value for key, value in facts.items() if key != "limited"}
    told["warnings"] = [*facts["warnings"], *_scaled_by_a_clipped_sun(facts, sun)]
    return {"file": settings["file"], "faces": settings["faces"], **told, **settings["orientation"]}


def _scaled_by_a_clipped_sun(facts, sun):
    """Of one meter alone, all that clipping took is taken for a darker picture."""
    if sun and sun["clipped"] and facts["calibrated_by"] in (["horizontal_lux"], ["sun_lux"]):
        (meter,) = facts["calibrated_by"]
        yield f"the sun is clipped: {meter} alone gives its lost light to the whole sky; measure a patch"


def _levels(roughness, face_sizes, files):
    """A level's seam is the worst that any file shows; None where a face has one texel."""
    seams = zip(*(facts["seams"] for facts in files), strict=True)
    return [
        {"level": level, "roughness": rough, "face_size": size, "seam": max(seam) if size > 1 else None}
        for level, (rough, size, seam) in enumerate(zip(roughness, face_sizes, seams, strict=True))
    ]


def _sheen(settings, facts, listed):
    roughness = settings["sheen_roughness"]
    sizes = [settings["sheen_face_size"] >> level for level in range(len(roughness))]
    return {"levels": _levels(roughness, sizes, [facts[entry["file"]] for entry in listed]), "files": listed}


def _bytes(packs, listed):
    """What all files take on disk, and what the largest pack takes on the GPU: a renderer loads one."""
    entries = {entry["file"]: entry for kind in listed.values() for entry in kind}
    names = [(pack["name"], pack["irradiance"], pack["sheen"]) for pack in packs]
    gpu = [sum(entries[name]["gpu_bytes"] for name in loaded if name in entries) for loaded in names]
    return {"disk": sum(entry["bytes"] for entry in entries.values()), "gpu": max(gpu)}


def _files(settings, packed_names, inputs, facts, kind):
    """One entry for each file whose name starts with `kind`."""
    entries = []
    for pack in settings["packs"]:
        for name in packed_names[pack["name"]]:
            if name.startswith(f"{kind}."):
                pixels = pack["irradiance_pixels"] if kind == "irradiance" else pack["pixels"]
                entries.append(
                    {
                        "file": name,
                        "container": pack["container"],
                        "pixels": pixels,
                        "cube_axes": pack["cube_axes"],
                        "bytes": inputs[name].size,
                        "gpu_bytes": facts[name]["gpu_bytes"],
                        "digest": inputs[name].digest,
                        "coding_error": facts[name]["coding_error"],
                    }
                )
    return entries
