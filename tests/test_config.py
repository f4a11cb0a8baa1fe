"""A valid pipeline file: what its probes hold, and how globs, overrides and defaults reach them."""

import dataclasses
import json
import time

import pytest

from skykiln.config import Pack, Patch, Probe, load_pipeline

HEAD = """
skykiln: 1
recipes:
  plain: {}
"""


@pytest.fixture
def load(tmp_path):
    """Write files (empty ones for a list of names) and load a pipeline text beside them."""

    def loaded(text, files=()):
        for name in files:
            (tmp_path / name).parent.mkdir(parents=True, exist_ok=True)
            (tmp_path / name).touch()
        path = tmp_path / "pipeline.yaml"
        path.write_text(text, encoding="utf-8")
        return load_pipeline(path)

    return loaded


DESIGNED = """
skykiln: 1                       # version of this schema
build_dir: build
cube_axes: negate_x
brdf: {size: 128}
recipes:
  landmark:
    face_size: 512
    colour: {working: rec709, assume: acescg}
    sun: {action: keep}
    specular:
      levels: 8
      roughness: linear
      tolerance: 0.005
    irradiance: {face_size: 32, sh_order: 2, pixels: rgba16f}
    sheen: {levels: 2, roughness: linear, face_size: 16}
    pack:
      - {container: ktx2, pixels: rgba16f}
  interior:
    face_size: auto
    specular: {levels: 3, roughness: [0, 0.25, 1]}
    pack:
      - {container: ktx2, pixels: rgba16f}
      - {container: ktx2, pixels: rgba16f, cube_axes: direct, name: unflipped}
sources:
  ferry_noon:
    file: skies/ferry_noon.exr
    recipe: landmark
    layout: auto
    yaw_deg: 30
    exposure_ev: 0
    horizontal_lux: 1e5
    sun_lux: 1.1e5
    patch: {direction: [0, 0, -1], size_deg: 6, reflectance: 0.18, lux: 5e4, balance: true}
    white_luminance: 4000
    max_luminance: 1e6
    face_axes: openexr
    ground: {reflectance: 0.2}
    flip: true
    up: z
    pitch_deg: 2
    roll_deg: -1
    part: 1
    layer: sky
    allow_ldr: true
    extra: {position: [0, 1.5, 0]}
  concourse:
    files: "concourse/**/*.exr"
    recipe: interior
    extra: {box: 1, room: hall}
    each: {stair_02: {exposure_ev: 0.5, extra: {room: stair}}, upper/desk: {recipe: landmark}}
gates: {}
"""
PLAIN_PACK = Pack(
    "specular.rgba16f.ktx2", "ktx2", "rgba16f", "negate_x", 0, "irradiance.rgba16f.ktx2", "rgba16f",
    "sheen.rgba16f.ktx2",
)  # fmt: skip
FILES = ["concourse/stair_02.exr", "concourse/upper/desk.exr", "concourse/upper/lounge.v2.exr"]


def test_every_key_of_the_pipeline_file_reaches_the_probe(load):
    probe = next(probe for probe in load(DESIGNED, FILES).probes() if probe.name == "ferry_noon")
    assert probe == Probe(
        name="ferry_noon",
        file="skies/ferry_noon.exr",
        faces=(),
        layout="auto",
        face_axes="openexr",
        ground=("reflectance", (0.2, 0.2, 0.2)),
        flip=True,
        up="z",
        yaw_deg=30.0,
        pitch_deg=2.0,
        roll_deg=-1.0,
        part=1,
        layer="sky",
        allow_ldr=True,
        exposure_ev=0.0,
        horizontal_lux=1e5,
        sun_lux=1.1e5,
        patch=Patch((0.0, 0.0, -1.0), 6.0, None, 0.18, 5e4, True),
        white_luminance=4000.0,
        max_luminance=1e6,
        extra='{"position":[0,1.5,0]}',
        recipe="landmark",
        working="rec709",
        assumed="acescg",
        sun_action="keep",
        face_size=512,
        roughness=tuple(level / 7 for level in range(8)),
        tolerance=0.005,
        irradiance_face_size=32,
        irradiance_sh_order=2,
        packs=(PLAIN_PACK,),
        sheen_face_size=16,
        sheen_roughness=(0.5, 1.0),
    )


def test_head_of_the_file_and_its_folder(load, tmp_path):
    pipeline = load(DESIGNED, FILES)
    assert pipeline.root == tmp_path
    assert pipeline.build_dir == tmp_path / "build"
    assert (pipeline.cube_axes, pipeline.brdf_size, pipeline.gates) == ("negate_x", 128, {})
    assert list(pipeline.recipes) == ["landmark", "interior"]


def test_probes_come_sorted_and_are_named_by_the_path_below_the_fixed_part(load):
    names = [probe.name for probe in load(DESIGNED, FILES).probes()]
    assert names == ["concourse/stair_02", "concourse/upper/desk", "concourse/upper/lounge.v2", "ferry_noon"]


def test_each_overrides_the_entry_and_extra_is_laid_over(load):
    probes = {probe.name: probe for probe in load(DESIGNED, FILES).probes()}
    stair, lounge = probes["concourse/stair_02"], probes["concourse/upper/lounge.v2"]
    assert (stair.exposure_ev, lounge.exposure_ev) == (0.5, 0.0)
    assert stair.extra == '{"box":1,"room":"stair"}'
    assert lounge.extra == '{"box":1,"room":"hall"}'
    assert (stair.recipe, probes["concourse/upper/desk"].recipe) == ("interior", "landmark")


def test_auto_face_size_listed_roughness_and_named_pack(load):
    probe = load(DESIGNED, FILES).probes()[0]
    assert probe.face_size == 0
    assert probe.roughness == (0.0, 0.25, 1.0)
    assert probe.packs[1] == Pack(
        "specular.unflipped.ktx2", "ktx2", "rgba16f", "direct", 0, "irradiance.unflipped.ktx2", "rgba16f",
        "sheen.unflipped.ktx2",
    )  # fmt: skip


PACKS = """
skykiln: 1
cube_axes: negate_z
recipes:
  all:
    face_size: 64
    specular: {levels: full}
    irradiance: {pixels: rgb9e5}
    pack:
      - {container: ktx2, pixels: bc6h, compress: 19}
      - {container: dds, pixels: r11g11b10f}
      - {container: exr, pixels: half}
      - {container: exr, pixels: float, name: grading, cube_axes: direct}
sources: {sky: {file: sky.exr, recipe: all}}
"""


def test_packs_name_their_files_by_coding_or_name_and_exr_keeps_its_own_for_irradiance(load):
    (probe,) = load(PACKS).probes()
    assert [(pack.name, pack.irradiance, pack.irradiance_pixels) for pack in probe.packs] == [
        ("specular.bc6h.ktx2", "irradiance.rgb9e5.ktx2", "rgb9e5"),
        ("specular.r11g11b10f.dds", "irradiance.rgb9e5.dds", "rgb9e5"),
        ("specular.half.exr", "irradiance.half.exr", "half"),
        ("specular.grading.exr", "irradiance.grading.exr", "float"),
    ]
    assert [pack.compress for pack in probe.packs] == [19, 0, 0, 0]
    assert [pack.cube_axes for pack in probe.packs] == ["negate_z"] * 3 + ["direct"]


def test_full_chain_goes_down_to_one_texel(load):
    assert load(PACKS).probes()[0].roughness == tuple(level / 6 for level in range(7))


@pytest.mark.parametrize(
    ("text", "size"),
    [
        ("8388608", 8 * 2**20),
        ("8 MiB", 8 * 2**20),
        ("8MiB", 8 * 2**20),
        ("1.5 GB", 1_500_000_000),
        ("900 kB", 900_000),
        ("3 B", 3),
    ],
)
def test_limits_of_size_are_numbers_of_bytes_or_have_a_unit(load, text, size):
    head = HEAD + f"gates: {{bytes: {{probe_gpu: {text}}}}}\n"
    pipeline = load(head + "sources: {sky: {file: sky.hdr, recipe: plain}}")
    assert pipeline.gates == {"bytes.probe_gpu": size}


def test_defaults_are_the_documented_ones(load, tmp_path):
    pipeline = load(HEAD + "sources: {sky: {file: sky.hdr, recipe: plain}}")
    (probe,) = pipeline.probes()
    assert pipeline.build_dir == tmp_path / "build"
    assert (pipeline.cube_axes, pipeline.brdf_size) == ("negate_x", 128)
    assert (probe.face_size, len(probe.roughness), probe.tolerance) == (0, 8, 0.005)
    assert (probe.irradiance_face_size, probe.irradiance_sh_order) == (32, 2)
    assert [pack.name for pack in probe.packs] == ["specular.rgba16f.ktx2"]
    assert (probe.yaw_deg, probe.exposure_ev, probe.horizontal_lux, probe.extra) == (0, 0, None, "{}")


def test_cube_axes_at_the_top_reach_packs_that_name_none(load):
    text = HEAD + "cube_axes: negate_z\nsources: {sky: {file: sky.hdr, recipe: plain}}"
    assert load(text).probes()[0].packs[0].cube_axes == "negate_z"


def test_single_level_is_the_mirror(load):
    text = "skykiln: 1\nrecipes: {one: {specular: {levels: 1}}}\nsources: {sky: {file: a.exr, recipe: one}}"
    assert load(text).probes()[0].roughness == (0.0,)


def test_probe_survives_its_json_and_equal_probes_have_equal_text(load):
    for probe in load(DESIGNED, FILES).probes():
        text = probe.to_json()
        assert Probe.from_json(text) == probe
        assert hash(Probe.from_json(text)) == hash(probe)
        assert Probe.from_json(json.dumps(json.loads(text), indent=4)).to_json() == text


def test_comments_order_and_flow_style_change_no_probe(load):
    one = load(HEAD + "sources:\n  a: {file: a.exr, recipe: plain}\n  b: {file: b.exr, recipe: plain}\n")
    two = load(
        "sources: {b: {recipe: plain, file: b.exr, extra: {}}, # second\n  a: {file: a.exr, recipe: plain}}\n"
        "recipes:\n  plain: {face_size: auto}\nskykiln: 1\n"
    )
    assert one.probes() == two.probes()


def test_missing_single_file_is_left_to_the_bake(load):
    assert load(HEAD + "sources: {sky: {file: nowhere.exr, recipe: plain}}").probes()[0].file == "nowhere.exr"


def test_anchors_share_settings(load):
    text = HEAD + (
        "sources:\n  a: {file: a.exr, recipe: plain, extra: &box {half: 2}}\n"
        "  b: {file: b.exr, recipe: plain, extra: *box}\n"
    )
    first, second = load(text).probes()
    assert first.extra == second.extra == '{"half":2}'


def test_glob_leaves_out_folders_and_what_a_bake_left(load):
    files = ["skies/noon.exr", "build/probes/noon/level.exr", "skies/folder.exr/inner.txt"]
    text = HEAD + 'sources: {all: {files: "**/*.exr", recipe: plain}}'
    assert [probe.name for probe in load(text, files).probes()] == ["all/skies/noon"]


def test_glob_may_start_above_the_pipeline_folder(load, tmp_path):
    (tmp_path.parent / f"{tmp_path.name}_library").mkdir()
    (tmp_path.parent / f"{tmp_path.name}_library" / "dusk.exr").touch()
    text = HEAD + f'sources: {{library: {{files: "../{tmp_path.name}_library/*.exr", recipe: plain}}}}'
    (probe,) = load(text).probes()
    assert (probe.name, probe.file) == ("library/dusk", f"../{tmp_path.name}_library/dusk.exr")


def test_names_may_hold_blanks_and_any_script(load):
    text = HEAD + 'sources: {Fähre: {files: "* *.exr", recipe: plain}}'
    assert [probe.name for probe in load(text, ["zweites Deck.exr"]).probes()] == ["Fähre/zweites Deck"]


def test_pipeline_reached_by_a_relative_path_has_an_absolute_root(load, tmp_path, monkeypatch):
    load(HEAD + "sources: {sky: {file: a.exr, recipe: plain}}")
    monkeypatch.chdir(tmp_path)
    assert load_pipeline("pipeline.yaml").root == tmp_path


def test_two_thousand_probes_load_quickly(load):
    entries = "".join(
        f"  room/p{i}: {{file: room/p{i}.exr, recipe: plain, extra: {{position: [{i}, 1, 2]}}}}\n"
        for i in range(2000)
    )
    start = time.perf_counter()
    assert len(load(HEAD + "sources:\n" + entries).probes()) == 2000
    assert time.perf_counter() - start < 2.0  # measured: 0.1 s


def test_probe_and_pack_are_plain_frozen_values(load):
    probe = load(HEAD + "sources: {sky: {file: a.exr, recipe: plain}}").probes()[0]
    with pytest.raises(dataclasses.FrozenInstanceError):
        probe.name = "other"


SIX = """
sources:
  room:
    recipe: plain
    faces: {+x: a/px.exr, -x: a/nx.exr, +y: a/py.exr, -y: a/ny.exr, +z: a/pz.exr, -z: ./a/nz.exr}
"""


def test_six_files_of_faces_are_one_probe(load):
    (probe,) = load(HEAD + SIX).probes()
    assert (probe.name, probe.file) == ("room", "a/px.exr")
    assert probe.faces == tuple(f"a/{face}.exr" for face in ("px", "nx", "py", "ny", "pz", "nz"))
    assert probe.files == probe.faces
    assert Probe.from_json(probe.to_json()) == probe


def test_ground_and_patch_survive_json_in_every_form(load):
    for ground in ("mirror", "0.5", "[1, 2, 3]", "{reflectance: [0.1, 0.2, 0.3]}", "null"):
        source = f"file: a.exr, recipe: plain, ground: {ground}"
        patch = "patch: {direction: [0, 1, 0], size_deg: 3, cd_m2: 100}"
        (probe,) = load(HEAD + f"sources: {{sky: {{{source}, {patch}}}}}").probes()
        assert Probe.from_json(probe.to_json()) == probe


def test_limits_and_gates_of_light_reach_the_pipeline(load):
    text = HEAD + "sources: {sky: {file: a.exr, recipe: plain}}\n"
    text += "limits: {max_pixels: 5000}\ngates: {brightness: {stops: 1}, horizontal_lux: [100, 120000]}"
    pipeline = load(text)
    assert pipeline.max_pixels == 5000
    assert pipeline.gates == {"brightness.stops": 1, "horizontal_lux": [100, 120000]}
