"""The values of probe.json, from the settings of PublishProbe and the facts of the stages before it."""


def probe_record(settings, packed_names, inputs) -> dict:
    """What probe.json holds.

    Parameters: settings : those of PublishProbe; packed_names : name of the pack -> names of its files
                inputs : role -> Input
    """
    facts, totals = inputs["facts"].json(), inputs["totals"].json()
    packs = {name: inputs[f"{name}.json"].json() for name in packed_names}
    shared = next(iter(packs.values()))
    return {
        "schema": 1,
        "name": settings["name"],
        "source": _source(settings, facts),
        "recipe": settings["recipe"],
        "extra": settings["extra"],
        "cube_axes": settings["cube_axes"],
        "units": settings["units"],
        "storage_ev": shared["storage_ev"],
        "specular": {
            "levels": _levels(settings["roughness"], shared["face_sizes"]),
            "files": _files(settings, packed_names, inputs, "specular"),
        },
        "irradiance": {
            "face_size": shared["irradiance_face_size"],
            "files": _files(settings, packed_names, inputs, "irradiance"),
            **{key: totals[key] for key in ("sh", "sh_smallest", "sh_window")},
        },
        "sun": None,
        "energy": {
            **{key: totals[key] for key in ("mean_radiance", "level_irradiance", "horizontal_illuminance")},
            "lost_to_clamping": max(pack["lost_to_clamping"] for pack in packs.values()),
        },
        "audit": None,
    }


def _source(settings, facts):
    return {"file": settings["file"], **facts, "yaw_deg": settings["yaw_deg"]}


def _levels(roughness, face_sizes):
    pairs = zip(roughness, face_sizes, strict=True)
    return [
        {"level": level, "roughness": rough, "face_size": size} for level, (rough, size) in enumerate(pairs)
    ]


def _files(settings, packed_names, inputs, kind):
    """One entry for each file whose name starts with `kind`."""
    entries = []
    for pack in settings["packs"]:
        for name in packed_names[pack["name"]]:
            if name.startswith(f"{kind}."):
                pixels = pack["pixels"] if kind == "specular" else settings["irradiance_pixels"]
                entries.append(
                    {
                        "file": name,
                        "container": pack["container"],
                        "pixels": pixels,
                        "cube_axes": pack["cube_axes"],
                        "bytes": inputs[name].path.stat().st_size,
                        "digest": inputs[name].digest,
                    }
                )
    return entries
