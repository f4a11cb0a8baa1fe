"""The shipped JSON Schemas: valid, described throughout, equal to what the models say, strict."""

import copy
import json

import jsonschema
import pytest
import yaml

from skykiln.config import pipeline_schema
from skykiln.schemas import NAMES, shipped_schema

DIGEST = "0123456789abcdef" * 4
RGB = [1.0, 0.5, 0.25]
PACKED = {
    "file": "specular.rgba16f.ktx2",
    "container": "ktx2",
    "pixels": "rgba16f",
    "cube_axes": "negate_x",
    "bytes": 1000,
    "gpu_bytes": 2000,
    "digest": DIGEST,
    "coding_error": {"flux": 0.0001, "log2_rms": 0.01},
}
TEXEL = {
    "map": "level 1",
    "direction": [0.0, 1.0, 0.0],
    "channel": "green",
    "baked": 1.01,
    "estimate": 1.0,
    "deviation": 0.01,
    "z": 0.9,
    "used": 0.2,
}
AUDIT = {
    "passed": True,
    "why": "",
    "texels": 200,
    "samples": 200000,
    "share_passed": 1.0,
    "limit": 6.0,
    "worst": TEXEL,
    "maps": [{"map": "all", "texels": 200, "deviation": 0.001, "z": 0.5, "used": 0.1, "worst": TEXEL}],
    "files": [
        {
            "file": "specular.rgba16f.ktx2",
            "against": "the source",
            "passed": True,
            "share_passed": 1.0,
            "used": 0.2,
        }
    ],
}
PROBE = {
    "schema": 1,
    "name": "concourse/stair_02",
    "source": {
        "file": "sample_assets/concourse/stair_02.exr",
        "faces": [],
        "digest": DIGEST,
        "header": {"format": "openexr", "pixel_type": "half"},
        "repaired": {"nan": 0, "inf": 0, "negative": 2},
        "colour": {
            "chromaticities": [[0.708, 0.292], [0.17, 0.797], [0.131, 0.046], [0.3127, 0.329]],
            "assumed": False,
            "working": "rec709",
        },
        "out_of_gamut": {"pixels": 3, "deepest": -0.1},
        "layout": "equirect",
        "face_axes": None,
        "width": 256,
        "height": 128,
        "uncovered": 0,
        "panorama": {"width": 256, "height": 128},
        "calibrated_by": ["horizontal_lux", "sun_lux"],
        "white_gains": RGB,
        "restored_lux": 60000.0,
        "scale": 1.0,
        "warnings": [],
        "flip": False,
        "up": "y",
        "yaw_deg": 0.0,
        "pitch_deg": 0.0,
        "roll_deg": 0.0,
    },
    "recipe": "interior",
    "extra": {"position": [1, 2, 3]},
    "cube_axes": "negate_x",
    "units": "relative",
    "primaries": "rec709",
    "caution": None,
    "storage_ev": 0,
    "specular": {
        "levels": [
            {"level": 0, "roughness": 0.0, "face_size": 64, "seam": 1.2},
            {"level": 1, "roughness": 1.0, "face_size": 1, "seam": None},
        ],
        "files": [PACKED],
    },
    "irradiance": {
        "face_size": 32,
        "files": [{**PACKED, "file": "irradiance.rgba16f.ktx2"}],
        "sh": [RGB] * 9,
        "sh_smallest": -0.01,
    },
    "sun": {
        "direction": [0.0, 0.8, -0.6],
        "angular_radius_deg": 0.27,
        "illuminance": 90000.0,
        "irradiance": RGB,
        "colour": RGB,
        "contrast_ev": 14.5,
        "clipped": True,
    },
    "energy": {
        "mean_radiance": RGB,
        "mean_luminance": 0.6,
        "level_irradiance": RGB,
        "horizontal_illuminance": 2.0,
        "brightest": {"direction": [0.0, 1.0, 0.0], "luminance": 3.0},
        "limited": {"max_luminance": 1e4, "lost_share": 0.5, "lost_illuminance": 3e4},
        "lost_to_clamping": 0.0,
    },
    "bytes": {"disk": 1000, "gpu": 2000},
    "audit": AUDIT,
}
BRDF = {
    "schema": 1,
    "size": 4,
    "file": "brdf.rg16f.ktx2",
    "container": "ktx2",
    "pixels": "rg16f",
    "bytes": 300,
    "digest": DIGEST,
    "directional_albedo": [[1.0, 1.0, 1.0, 1.0]] * 4,
    "average_albedo": [1.0, 0.9, 0.7, 0.5],
    "sheen": {
        "file": "sheen.r16f.ktx2",
        "container": "ktx2",
        "pixels": "r16f",
        "bytes": 250,
        "digest": DIGEST,
    },
}
STAGE = {"stage": "specular level 3", "reason": "roughness was 0.4286, is 0.4", "seconds": 0.2}
HEAVY = {"gate": "bytes.probe_gpu", "why": "5 MiB on the GPU, the limit is 4 MiB"}
LIGHT = {
    "units": "cd/m2",
    "mean_luminance": 4000.0,
    "horizontal_illuminance": 98000.0,
    "mean_radiance": RGB,
    "brightest": {"direction": [0.0, 0.6, 0.8], "luminance": 8e8},
    "sun": None,
    "lost_to_clamping": 0.0,
    "warnings": [],
    "repaired": 0,
    "sh_smallest": -0.1,
    "seam": 1.1,
}
CHANGE = {
    "levels": [{"largest": 0.5, "mean": 0.01}],
    "largest": 0.5,
    "mean": 0.01,
    "illuminance": {"before": 0.0, "after": 1.0, "ratio": None},
    "moved_deg": 3.0,
    "source_changed": True,
}
NIGHT_ENTRY = {
    "state": "unchanged",
    "recipe": "landmark",
    "stages": [],
    "failure": None,
    "gates": [],
    "audit": {
        **{key: AUDIT[key] for key in ("passed", "why", "texels", "share_passed")},
        "worst": {key: TEXEL[key] for key in ("map", "deviation", "z")},
    },
    "accepted": False,
    "bytes": {"disk": 500, "gpu": 1000},
    "light": LIGHT,
    "change": None,
}
NIGHT = {
    "schema": 1,
    "skykiln": "0.1.0",
    "started": "2031-05-01T02:00:00+02:00",
    "seconds": 12.5,
    "exit_status": 1,
    "totals": {"probes": 4, "rebuilt": 1, "unchanged": 1, "held": 1, "failed": 1},
    "bytes": {"disk": 1000, "gpu": 2000},
    "gates": [{"gate": "bytes.night_disk", "why": "2 GiB on disk, the limit is 1 GiB"}],
    "stages_run": 1,
    "probes": [
        {**NIGHT_ENTRY, "name": "ferry_noon", "state": "rebuilt", "stages": [STAGE], "change": CHANGE},
        {**NIGHT_ENTRY, "name": "night_quay", "gates": [HEAVY], "accepted": True},
        {
            **NIGHT_ENTRY,
            "name": "overcast_quay",
            "state": "failed",
            "stages": [],
            "failure": {"file": "overcast_quay.exr", "stage": "DecodeSource", "cause": "the file ends early"},
            "bytes": None,
        },
        {**NIGHT_ENTRY, "name": "pier", "state": "held", "gates": [HEAVY]},
    ],
}
PIPELINE = yaml.safe_load("""
skykiln: 1
brdf: {size: 128}
recipes: {plain: {face_size: 64, specular: {levels: 3, roughness: [0, 0.5, 1]}}}
sources:
  sky: {file: sky.exr, recipe: plain, horizontal_lux: null}
  rooms: {files: "*.exr", recipe: plain, each: {a: {exposure_ev: 1}}}
gates: {}
""")
EXAMPLES = {"pipeline": PIPELINE, "probe": PROBE, "brdf": BRDF, "night": NIGHT}

MISTAKES = [
    ("pipeline", ("skykiln",), 2),
    ("pipeline", ("recipes", "plain", "face_size"), 65),
    ("pipeline", ("recipes", "plain", "specular", "level"), 3),
    ("pipeline", ("recipes", "plain", "specular", "roughness"), "steep"),
    ("pipeline", ("sources", "sky", "files"), "*.exr"),
    ("pipeline", ("gates", "audit"), "1 %"),
    ("probe", ("schema",), 2),
    ("probe", ("name",), "/etc"),
    ("probe", ("source", "digest"), "0123"),
    ("probe", ("source", "repaired", "negative"), -1),
    ("probe", ("source", "layout"), "cross"),
    ("probe", ("source", "face_axes"), "renderer"),
    ("probe", ("source", "out_of_gamut", "deepest"), 0.1),
    ("probe", ("source", "calibrated_by"), ["eye"]),
    ("probe", ("source", "colour", "chromaticities"), [[0.3, 0.3]]),
    ("probe", ("sun", "direction"), [0.0, 2.0, 0.0]),
    ("probe", ("sun", "illuminance"), 0),
    ("probe", ("energy", "limited", "lost_share"), 2),
    ("probe", ("caution",), ""),
    ("probe", ("storage_ev",), 0.5),
    ("probe", ("units",), "nits"),
    ("probe", ("specular", "levels"), []),
    ("probe", ("specular", "levels", 0, "roughness"), 1.5),
    ("probe", ("specular", "files", 0, "file"), "../specular.rgba16f.ktx2"),
    ("probe", ("irradiance", "sh"), [RGB] * 8),
    ("probe", ("irradiance", "sh", 0), [1.0, 2.0]),
    ("probe", ("energy", "mean_radiance"), [-1.0, 0.0, 0.0]),
    ("probe", ("surprise",), 1),
    ("brdf", ("pixels",), "rgba16f"),
    ("brdf", ("directional_albedo", 0), [2.0] * 4),
    ("brdf", ("sheen", "pixels"), "rg16f"),
    ("night", ("exit_status",), 2),
    ("night", ("started",), "yesterday"),
    ("night", ("probes", 0, "failure"), NIGHT["probes"][2]["failure"]),
    ("night", ("probes", 0, "stages"), []),
    ("night", ("probes", 1, "stages"), [STAGE]),
    ("night", ("probes", 2, "failure"), None),
    ("night", ("probes", 3, "gates"), []),
    ("night", ("probes", 3, "accepted"), True),
    ("night", ("gates", 0, "why"), ""),
    ("night", ("bytes", "disk"), -1),
    ("night", ("probes", 0, "audit", "share_passed"), 1.5),
    ("probe", ("audit",), None),
    ("probe", ("audit", "worst", "map"), "specular"),
    ("probe", ("audit", "files"), []),
    ("night", ("probes", 0, "change", "moved_deg"), 200),
    ("night", ("probes", 0, "light", "units"), "nits"),
    ("night", ("probes", 0, "light", "mean_luminance"), -1),
    ("pipeline", ("gates", "horizontal_lux"), [1000]),
    ("pipeline", ("gates", "brightness"), {"stops": 0}),
    ("pipeline", ("sources", "sky", "layout"), "cross"),
    ("pipeline", ("sources", "sky", "ground"), "water"),
    ("pipeline", ("sources", "sky", "patch"), {"direction": [0, 0, 1]}),
    ("probe", ("specular", "levels", 0, "seam"), -1),
    ("probe", ("specular", "files", 0, "pixels"), "rg16f"),
    ("probe", ("irradiance", "files", 0, "pixels"), "bc6h"),
    ("pipeline", ("gates", "bytes"), {"probe_gpu": "8 megs"}),
    ("pipeline", ("recipes", "plain", "pack"), [{"container": "ktx2", "pixels": "rgba16f", "compress": 23}]),
    ("night", ("probes", 0, "stages", 0, "seconds"), -1),
]


def checker(name):
    return jsonschema.Draft202012Validator(shipped_schema(name))


def test_shipped_pipeline_schema_is_the_models():
    assert shipped_schema("pipeline") == json.loads(json.dumps(pipeline_schema()))


@pytest.mark.parametrize("name", NAMES)
def test_schema_is_valid_itself_and_accepts_its_example(name):
    jsonschema.Draft202012Validator.check_schema(shipped_schema(name))
    checker(name).validate(EXAMPLES[name])


@pytest.mark.parametrize(("name", "path", "value"), MISTAKES)
def test_schema_refuses_a_mistake(name, path, value):
    example = copy.deepcopy(EXAMPLES[name])
    parent = example
    for step in path[:-1]:
        parent = parent[step]
    parent[path[-1]] = value
    assert not checker(name).is_valid(example)


def test_sheen_chain_may_stand_in_probe_json_with_files_of_its_name():
    level = {"level": 0, "roughness": 0.5, "face_size": 16, "seam": 1.2}
    sheen = {"levels": [level], "files": [{**PACKED, "file": "sheen.rgba16f.ktx2"}]}
    assert checker("probe").is_valid({**EXAMPLES["probe"], "sheen": sheen})
    assert not checker("probe").is_valid({**EXAMPLES["probe"], "sheen": {**sheen, "files": [PACKED]}})


@pytest.mark.parametrize("name", ["probe", "brdf"])
def test_every_key_of_what_a_bake_leaves_is_needed(name):
    for key in EXAMPLES[name]:
        assert not checker(name).is_valid({k: v for k, v in EXAMPLES[name].items() if k != key})


def properties(schema, whole):
    """(name, schema) of every property anywhere in a schema."""
    if isinstance(schema, dict):
        found = schema.get("properties", {})
        for key, value in found.items() if "required" in schema or "additionalProperties" in schema else ():
            yield key, {**whole["$defs"].get(value.get("$ref", "").rpartition("/")[2], {}), **value}
        for value in schema.values():
            yield from properties(value, whole)
    elif isinstance(schema, list):
        for value in schema:
            yield from properties(value, whole)


@pytest.mark.parametrize("name", NAMES)
def test_every_key_is_described(name):
    whole = shipped_schema(name)
    found = list(properties(whole, whole))
    assert len(found) >= 9
    assert [key for key, value in found if not value.get("description")] == []
