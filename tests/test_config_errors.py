"""Every mistake in a pipeline file is told with its line, its key, what was found and what is allowed."""

import os

import pytest

from skykiln.config import load_pipeline
from skykiln.errors import PipelineError

VALID = {
    "head": "skykiln: 1",
    "recipe": "recipes: {plain: {}}",
    "source": "sources: {sky: {file: sky.exr, recipe: plain}}",
}


@pytest.fixture
def problems(tmp_path, monkeypatch):
    """The problems of a pipeline text, as a user in its folder sees them."""
    monkeypatch.chdir(tmp_path)

    def found(text, files=()):
        for name in files:
            (tmp_path / name).parent.mkdir(parents=True, exist_ok=True)
            (tmp_path / name).touch()
        raw = text if isinstance(text, bytes) else text.encode()
        (tmp_path / "pipeline.yaml").write_bytes(raw)
        with pytest.raises(PipelineError) as caught:
            load_pipeline("pipeline.yaml")
        assert str(caught.value) == "\n".join(caught.value.problems)
        return caught.value.problems

    return found


def lines(**changed):
    """A pipeline text of three lines or more, valid but for what is changed."""
    return "\n".join({**VALID, **changed}.values()) + "\n"


NUMBERS = "auto, 1, 2, 4, 8, 16, 32, 64, 128, 256, 512, 1024, 2048, 4096"

CODINGS = "rgba16f, rgb9e5, r11g11b10f, bc6h, half, float"
LAYOUTS = (
    "auto, equirect, equirect_upper, cube, cross_horizontal, cross_vertical, strip_horizontal, "
    "strip_vertical, angular, mirror_ball, fisheye"
)
GROUNDS = (
    "mirror, a radiance from 0 (a number, or three), {reflectance: a number from 0 to 1, or three}, or null"
)
RISING = "allowed: numbers that start with 0 and rise to at most 1"
SIZES = "a number of bytes such as 8388608, or a size such as 8 MiB or 1.5 GB"
OUTSIDE = "allowed: a folder that doesn't hold the pipeline file"

VALUES = [
    # key of a recipe, its text, what is told
    ("face_size", "300", f"found 300; allowed: {NUMBERS}"),
    ("face_size", "true", f"found true; allowed: {NUMBERS}"),
    ("face_size", "512.0", f"found 512.0; allowed: {NUMBERS}"),
    ("colour.working", "srgb", "found 'srgb'; allowed: rec709, rec2020, acescg"),
    ("colour.assume", "p3", "found 'p3'; allowed: rec709, rec2020, acescg, aces2065_1, display_p3"),
    ("sun.action", "remove", "found 'remove'; allowed: keep, separate"),
    ("specular.levels", "0", "found 0; allowed: a whole number from 1 to 13 or full"),
    ("specular.levels", "14", "found 14; allowed: a whole number from 1 to 13 or full"),
    ("specular.levels", "many", "found 'many'; allowed: a whole number from 1 to 13 or full"),
    ("specular.levels", "7.5", "found 7.5; allowed: a whole number from 1 to 13 or full"),
    ("specular.tolerance", "0", "found 0; allowed: a number above 0.0001 and below 0.5"),
    ("specular.tolerance", ".nan", "found NaN; allowed: a number above 0.0001 and below 0.5"),
    ("specular.tolerance", "1", "found 1; allowed: a number above 0.0001 and below 0.5"),
    (
        "specular.roughness",
        "squared",
        "found 'squared'; allowed: linear or a list with at least 1 item, each a number from 0 to 1",
    ),
    (
        "specular.roughness",
        "[0, x]",
        "found a list; allowed: linear or a list with at least 1 item, each a number from 0 to 1",
    ),
    ("sheen", "3", "found 3; allowed: a mapping or null"),
    ("sheen.levels", "10", "found 10; allowed: a whole number from 1 to 9"),
    (
        "sheen.roughness",
        "linear8",
        "found 'linear8'; allowed: linear or a list with at least 1 item, each a number from 0.1 to 1",
    ),
    ("sheen.roughness", "[0.5, 1]", "found 2 numbers; allowed: one per level, 5"),
    (
        "sheen.roughness",
        "[0, 0.2, 0.4, 0.6, 1]",
        "found 0, 0.2, 0.4, 0.6, 1; allowed: numbers that rise from at least 0.1 to at most 1",
    ),
    ("sheen.level", "3", "unknown key; did you mean 'levels'?"),
    ("irradiance.face_size", "33", "found 33; allowed: 1, 2, 4, 8, 16, 32, 64, 128, 256"),
    ("irradiance.sh_order", "3", "found 3; allowed: 2"),
    ("irradiance.sh_order", "true", "found true; allowed: 2"),
    ("irradiance.pixels", "bc6h", "found 'bc6h'; allowed: rgba16f, rgb9e5, r11g11b10f"),
    ("pack[0].container", "png", "found 'png'; allowed: ktx2, dds, exr"),
    ("pack[0].pixels", "bc7", f"found 'bc7'; allowed: {CODINGS}"),
    ("pack[0].pixels", "half", "found 'half'; allowed in ktx2: rgba16f, rgb9e5, r11g11b10f, bc6h"),
    ("pack[0].compress", "23", "found 23; allowed: a whole number from 1 to 22 or null"),
    ("pack[0].compress", "true", "found true; allowed: a whole number from 1 to 22 or null"),
    ("pack[0].cube_axes", "up", "found 'up'; allowed: negate_x, negate_z, direct or null"),
    ("pack[0].name", "../x", "found '../x'; allowed: text that matches ^[A-Za-z0-9_-]{1,64}$ or null"),
]


@pytest.mark.parametrize(("key", "value", "told"), VALUES)
def test_wrong_value_in_a_recipe_is_told_with_what_is_allowed(problems, key, value, told):
    recipe = ["recipes:", "  plain:"]
    if key.startswith("pack"):
        given = {"container": "ktx2", "pixels": "rgba16f", key.rpartition(".")[2]: value}
        recipe += ["    pack:", "      -"] + [f"        {name}: {word}" for name, word in given.items()]
        line = 6 + list(given).index(key.rpartition(".")[2])
    else:
        section, _, name = key.rpartition(".")
        recipe += [f"    {section}:", f"      {name}: {value}"] if section else [f"    {name}: {value}"]
        line = 5 if section else 4
    found = problems(lines(recipe="\n".join(recipe)))
    assert found == [f"pipeline.yaml:{line}: recipes.plain.{key}: {told}"]


@pytest.mark.parametrize(
    ("setting", "told"),
    [
        ("file: 3", "file: found 3; allowed: text"),
        ("file: ''", "file: found ''; allowed: text"),
        ("layout: cross", f"layout: found 'cross'; allowed: {LAYOUTS}"),
        ("layout: fisheye", f"layout: found 'fisheye', the sky alone; give ground: {GROUNDS}"),
        ("ground: water", f"ground: found 'water'; allowed: {GROUNDS}"),
        ("ground: -1", f"ground: found -1; allowed: {GROUNDS}"),
        ("ground: {reflectance: 1.5}", f"ground: found a mapping; allowed: {GROUNDS}"),
        ("ground: [1, 2]", f"ground: found a list; allowed: {GROUNDS}"),
        ("patch: 3", "patch: found 3; allowed: a mapping or null"),
        (
            "patch: {size: 3, size_deg: 3, direction: [0, 1, 0], lux: 1, reflectance: 0.2}",
            "patch.size: unknown key; did you mean 'size_deg'?",
        ),
        ("up: x", "up: found 'x'; allowed: y, z"),
        ("flip: 1", "flip: found 1; allowed: true or false"),
        (
            "face_axes: direct\n    layout: angular",
            "face_axes: found beside layout angular, whose images lie in one way alone; remove it",
        ),
        (
            "patch: {direction: [0, 0, 1], size_deg: 5}",
            "patch: allowed: cd_m2, or reflectance and lux, besides direction and size_deg",
        ),
        (
            "patch: {direction: [0, 0, 1], size_deg: 5, cd_m2: 1, lux: 1}",
            "patch: allowed: cd_m2, or reflectance and lux, besides direction and size_deg",
        ),
        (
            "patch: {direction: [0, 0, 0], size_deg: 5, cd_m2: 1}",
            "patch: found the direction 0, 0, 0; allowed: one that points somewhere",
        ),
        (
            "patch: {direction: [0, 1], size_deg: 5, cd_m2: 1}",
            "patch.direction: found a list; allowed: a list with 3 items, each a number",
        ),
        (
            "exposure_ev: 1\n    sun_lux: 9000",
            "exposure_ev: found beside sun_lux, which decides the scale; remove one of the two",
        ),
        ("yaw_deg: west", "yaw_deg: found 'west'; allowed: a number from -360 to 360"),
        ("yaw_deg: 361", "yaw_deg: found 361; allowed: a number from -360 to 360"),
        ("exposure_ev: 40", "exposure_ev: found 40; allowed: a number from -32 to 32"),
        (
            "horizontal_lux: 0",
            "horizontal_lux: found 0; allowed: a number above 0 and at most 10000000 or null",
        ),
        ("extra: [1]", "extra: found a list; allowed: a mapping"),
        ("extra: {a: .inf}", "extra: holds a number that is not finite; JSON has no such value"),
        ("each: {}", "each: found beside 'file'; it goes with files"),
        ("exposure: 1", "exposure: unknown key; did you mean 'exposure_ev'?"),
        ("recipe: plane", "recipe: no recipe is called 'plane'; did you mean 'plain'?"),
        ("recipe: landmark", "recipe: no recipe is called 'landmark'; known here: plain"),
    ],
)
def test_wrong_setting_of_a_source_is_told_at_its_line(problems, setting, told):
    given = {"file": "file: sky.exr", "recipe": "recipe: plain"}
    given[setting.partition(":")[0]] = setting
    source = "sources:\n  sky:\n    " + "\n    ".join(given.values())
    line = 5 + list(given.values()).index(setting)
    assert problems(lines(source=source)) == [f"pipeline.yaml:{line}: sources.sky.{told}"]


@pytest.mark.parametrize(
    ("head", "told"),
    [
        ("skykiln: 2", "skykiln: found 2; allowed: 1"),
        ("skykiln: true", "skykiln: found true; allowed: 1"),
        ("brdf: {size: 2}\nskykiln: 1", "brdf.size: found 2; allowed: a whole number from 4 to 1024"),
        ("cube_axes: up\nskykiln: 1", "cube_axes: found 'up'; allowed: negate_x, negate_z, direct"),
        ("gates: {audit: 1}\nskykiln: 1", "gates.audit: found 1; allowed: true or false"),
        (
            "gates: {weight: 1}\nskykiln: 1",
            "gates.weight: unknown key; known here: bytes, audit, brightness, horizontal_lux, change",
        ),
        (
            "gates: {horizontal_lux: [5, 1]}\nskykiln: 1",
            "gates.horizontal_lux: found 5, 1; allowed: [least, most]",
        ),
        ("limits: {max_pixel: 1}\nskykiln: 1", "limits.max_pixel: unknown key; did you mean 'max_pixels'?"),
        (
            "gates: {bytes: {probe_gpu: 8 megs}}\nskykiln: 1",
            f"gates.bytes.probe_gpu: found '8 megs'; allowed: {SIZES}",
        ),
        ("gates: {bytes: {night_disk: 0}}\nskykiln: 1", f"gates.bytes.night_disk: found 0; allowed: {SIZES}"),
        (
            "gates: {bytes: {probe_gpu: 1.5}}\nskykiln: 1",
            f"gates.bytes.probe_gpu: found 1.5; allowed: {SIZES}",
        ),
        ("cube_axis: direct\nskykiln: 1", "cube_axis: unknown key; did you mean 'cube_axes'?"),
        ("source: {}\nskykiln: 1", "source: unknown key; did you mean 'sources'?"),
        ("build_dir: .\nskykiln: 1", f"build_dir: found '.'; {OUTSIDE}"),
        ("build_dir: ..\nskykiln: 1", f"build_dir: found '..'; {OUTSIDE}"),
    ],
)
def test_wrong_head_is_told_at_its_line(problems, head, told):
    assert problems(lines(head=head)) == [f"pipeline.yaml:1: {told}"]


def test_the_design_example_of_an_unknown_key(problems):
    recipe = "recipes:\n  landmark:\n    specular:\n      level: 8"
    source = "sources: {sky: {file: sky.exr, recipe: landmark}}"
    assert problems(lines(recipe=recipe, source=source)) == [
        "pipeline.yaml:5: recipes.landmark.specular.level: unknown key; did you mean 'levels'?"
    ]


@pytest.mark.parametrize(
    ("roughness", "told"),
    [
        ("[0, 0.5, 1]", "found 3 numbers; allowed: one per level, 4"),
        ("[0.1, 0.5, 0.7, 1]", f"found 0.1, 0.5, 0.7, 1; {RISING}"),
        ("[0, 0.5, 0.5, 1]", f"found 0, 0.5, 0.5, 1; {RISING}"),
        ("[0, 0.5, 0.7, 1.5]", f"found 0, 0.5, 0.7, 1.5; {RISING}"),
        ("[0, 0.5, .nan, 1]", f"found 0, 0.5, nan, 1; {RISING}"),
    ],
)
def test_list_of_roughness_must_fit_the_levels_and_rise(problems, roughness, told):
    recipe = f"recipes:\n  plain:\n    specular:\n      levels: 4\n      roughness: {roughness}"
    assert problems(lines(recipe=recipe)) == [f"pipeline.yaml:6: recipes.plain.specular.roughness: {told}"]


def test_more_levels_than_a_fixed_face_has_are_refused(problems):
    recipe = "recipes:\n  plain:\n    face_size: 64\n    specular:\n      levels: 8"
    assert problems(lines(recipe=recipe)) == [
        "pipeline.yaml:6: recipes.plain.specular.levels: found 8; "
        "a face of 64 texels has at most 7 levels, down to 1 texel"
    ]


def test_same_pack_twice_needs_a_name(problems):
    pair = "{container: ktx2, pixels: rgba16f}"
    assert problems(lines(recipe=f"recipes:\n  plain:\n    pack:\n      - {pair}\n      - {pair}")) == [
        "pipeline.yaml:6: recipes.plain.pack[1]: gives the file specular.rgba16f.ktx2 as pack[0] does; "
        "give one a name:"
    ]


def pack_lines(*entries):
    return lines(recipe="\n".join(["recipes:\n  plain:\n    pack:", *(f"      - {{{e}}}" for e in entries)]))


@pytest.mark.parametrize(
    ("entry", "told"),
    [
        ("container: exr, pixels: bc6h", "pixels: found 'bc6h'; allowed in exr: half, float"),
        (
            "container: dds, pixels: float",
            "pixels: found 'float'; allowed in dds: rgba16f, rgb9e5, r11g11b10f, bc6h",
        ),
        ("container: dds, pixels: bc6h, compress: 3", "compress: found 3; allowed in ktx2 alone"),
        ("container: exr, pixels: half, compress: 3", "compress: found 3; allowed in ktx2 alone"),
    ],
)
def test_containers_take_their_own_codings_and_only_ktx2_is_compressed(problems, entry, told):
    assert problems(pack_lines(entry)) == [f"pipeline.yaml:5: recipes.plain.pack[0].{told}"]


def test_packs_that_would_share_an_irradiance_file_agree_on_cube_axes(problems):
    one, other = "container: ktx2, pixels: rgba16f", "container: ktx2, pixels: bc6h, cube_axes: direct"
    assert problems(pack_lines(one, other)) == [
        "pipeline.yaml:6: recipes.plain.pack[1]: gives the file irradiance.rgba16f.ktx2 as pack[0] does, "
        "with another cube_axes; give one a name:"
    ]


def test_full_chain_of_an_automatic_face_size_is_refused(problems):
    assert problems(lines(recipe="recipes:\n  plain:\n    specular:\n      levels: full")) == [
        "pipeline.yaml:5: recipes.plain.specular.levels: found 'full' with face_size auto; "
        "allowed: a whole number, or give face_size a number"
    ]


def test_list_of_roughness_must_fit_a_full_chain(problems):
    recipe = "recipes:\n  plain:\n    face_size: 4\n    specular: {levels: full, roughness: [0, 1]}"
    assert problems(lines(recipe=recipe)) == [
        "pipeline.yaml:5: recipes.plain.specular.roughness: found 2 numbers; allowed: one per level, 3"
    ]


def test_empty_pack_list_is_refused(problems):
    assert problems(lines(recipe="recipes: {plain: {pack: []}}")) == [
        "pipeline.yaml:2: recipes.plain.pack: found an empty list; allowed: a list with at least 1 item"
    ]


def test_pack_without_its_pixels_is_told_what_is_missing(problems):
    assert problems(lines(recipe="recipes:\n  plain:\n    pack:\n      - {container: ktx2}")) == [
        "pipeline.yaml:5: recipes.plain.pack[0].pixels: missing. Pixel coding of the specular chain: "
        "half or float for exr, one of the others for ktx2 and dds. "
        "bc6h needs the extra: pip install 'skykiln[bc6h]'."
    ]


def test_missing_keys_are_told_at_the_entry(problems):
    assert problems(lines(source="sources:\n  sky: {}")) == [
        "pipeline.yaml:4: sources.sky: file, files or faces: missing",
        "pipeline.yaml:4: sources.sky.recipe: missing. Name of the recipe that bakes it.",
    ]


@pytest.mark.parametrize(
    ("text", "told"),
    [
        ("", ":1: found nothing; allowed: a mapping that starts with 'skykiln: 1'"),
        ("- 1", ":1: found a list; allowed: a mapping that starts with 'skykiln: 1'"),
        ("night", ":1: found 'night'; allowed: a mapping that starts with 'skykiln: 1'"),
        ("skykiln: [\n", ":2: while parsing a flow node, did not find expected node content"),
        ("skykiln: 1\n\tx: 1", ":2: "),
        ("skykiln: 1\n---\nskykiln: 1", ":2: a second document starts; only one is read"),
        ("skykiln: 1\nx: \x00", ":2: unprintable character '\\x00'"),
        ("skykiln: 1\nx: *lost", ":2: alias *lost: no finished anchor has that name"),
        ("skykiln: 1\nx: &loop [*loop]", ":2: alias *loop: no finished anchor has that name"),
        ("skykiln: 1\n? [a, b]\n: 1", ":2: a key must be plain text"),
        ("skykiln: 1\nx: " + "[" * 30, ":2: nested deeper than 24 levels"),
        ("skykiln: 1\nx: " + "[" * 200_000, ":2: "),
        (b"skykiln: 1 # \xff", ": can't be read: it is not UTF-8 text; save it as UTF-8"),
    ],
)
def test_text_that_yaml_can_not_be_read_from_is_told_at_the_line(problems, text, told):
    (found,) = problems(text)
    assert found.startswith(f"pipeline.yaml{told}")


def test_aliases_that_unfold_to_a_huge_file_are_refused(problems):
    bomb = "x0: &x0 [a, a, a, a, a, a, a, a, a]\n" + "".join(
        f"x{i}: &x{i} [{', '.join([f'*x{i - 1}'] * 9)}]\n" for i in range(1, 12)
    )
    assert problems(bomb) == ["pipeline.yaml:7: more than 1,000,000 values, aliases written out"]


def test_huge_file_is_refused_before_it_is_read(problems):
    (found,) = problems(b"#" * 16_000_001)
    assert found == "pipeline.yaml: larger than 16,000,000 bytes; use globs"


def test_duplicate_keys_tags_and_merge_keys_are_told_together(problems):
    source = (
        "sources:\n  sky: {file: a.exr, recipe: plain}\n  sky: {file: b.exr, recipe: plain}\n"
        "  tagged: {file: !!python/name:os.system x, recipe: plain}\n"
        "  merged: {<<: {}, file: a.exr, recipe: plain}"
    )
    assert problems(lines(source=source)) == [
        "pipeline.yaml:5: sources.sky: the key is here twice; it was on line 4 first",
        "pipeline.yaml:6: sources.tagged.file: tag 'tag:yaml.org,2002:python/name:os.system'; "
        "tags are not read, write the plain value",
        "pipeline.yaml:7: sources.merged.<<: merge keys are not read; write the keys out",
    ]


def test_what_a_merge_key_would_bring_is_not_told_as_missing(problems):
    source = "sources:\n  sky: &sky {file: a.exr, recipe: plain}\n  other: {<<: *sky, yaw: 3}"
    assert problems(lines(source=source)) == [
        "pipeline.yaml:5: sources.other.<<: merge keys are not read; write the keys out",
        "pipeline.yaml:5: sources.other.yaw: unknown key; did you mean 'yaw_deg'?",
    ]


def test_entry_with_neither_file_nor_files_has_its_other_mistakes_told(problems):
    assert problems(lines(source="sources:\n  d: {recipe: x, each: {a: {yaw_deg: far}}}")) == [
        "pipeline.yaml:4: sources.d: file, files or faces: missing",
        "pipeline.yaml:4: sources.d.each.a.yaw_deg: found 'far'; allowed: a number from -360 to 360",
        "pipeline.yaml:4: sources.d.recipe: no recipe is called 'x'; known here: plain",
    ]


RECIPE_WITH_MANY_MISTAKES = """recipes:
  plain:
    face_sise: 8
    specular:
      tolerence: 0.1
      levels: 3
      roughness: [0, 0.5, 0.4]
    pack:
      - {container: ktx2, pixels: rgba16f, compress: 50}
      - {container: ktx2, pixels: rgba16f}
      - {container: exr, pixels: rgba16f, codec: 1}
      - {container: png, pixels: rgba16f}
"""


def test_wrong_keys_of_a_recipe_hide_none_of_its_other_mistakes(problems):
    found = problems(lines(recipe=RECIPE_WITH_MANY_MISTAKES))
    assert [problem.partition("plain.")[2] for problem in found] == [
        "face_sise: unknown key; did you mean 'face_size'?",
        "specular.tolerence: unknown key; did you mean 'tolerance'?",
        "specular.roughness: found 0, 0.5, 0.4; allowed: numbers that start with 0 and rise to at most 1",
        "pack[0].compress: found 50; allowed: a whole number from 1 to 22 or null",
        "pack[1]: gives the file specular.rgba16f.ktx2 as pack[0] does; give one a name:",
        "pack[2].codec: unknown key; known here: container, pixels, compress, cube_axes, name",
        "pack[2].pixels: found 'rgba16f'; allowed in exr: half, float",
        "pack[3].container: found 'png'; allowed: ktx2, dds, exr",
    ]


def test_slip_in_a_key_is_not_told_again_as_what_it_would_have_mended(problems):
    recipe = """recipes:
  plain:
    specular: {level: 3, roughness: [0, 0.5, 1]}
    pack:
      - {container: ktx2, pixels: rgba16f}
      - {container: ktx2, pixels: rgba16f, nane: second}
"""
    assert [problem.partition("plain.")[2] for problem in problems(lines(recipe=recipe))] == [
        "specular.level: unknown key; did you mean 'levels'?",
        "pack[1].nane: unknown key; did you mean 'name'?",
    ]


def test_each_that_names_no_file_is_told_beside_wrong_keys(problems):
    source = """sources:
  rooms:
    files: "*.exr"
    yaw: 3
    each:
      loby: {exposure: 1}
"""
    found = problems(lines(source=source), files=["lobby.exr"])
    assert [problem.partition("rooms.")[2].partition(";")[0] for problem in found] == [
        "recipe: missing. Name of the recipe that bakes them.",
        "yaw: unknown key",
        "each.loby.exposure: unknown key",
        "each.loby: names no file of the glob",
    ]


@pytest.mark.parametrize(
    ("settings", "key"),
    [
        ("exposure_ev: 1, horizontal_lux: 900", "exposure_ev"),
        ("horizontal_lux: 900, each: {lobby: {exposure_ev: 1}}", "each.lobby.exposure_ev"),
        ("exposure_ev: 1, each: {lobby: {horizontal_lux: 900}}", "each.lobby.horizontal_lux"),
    ],
)
def test_stops_beside_a_measured_illuminance_are_refused(problems, settings, key):
    source = f'sources:\n  rooms: {{files: "*.exr", recipe: plain, {settings}}}'
    assert problems(lines(source=source), files=["lobby.exr"]) == [
        f"pipeline.yaml:4: sources.rooms.{key}: found beside horizontal_lux, which decides the scale; "
        "remove one of the two"
    ]


def test_words_that_are_left_out_of_a_message_are_counted(problems):
    recipes = "recipes: {" + ", ".join(f"r{number:02}: {{}}" for number in range(15)) + "}"
    (found,) = problems(lines(recipe=recipes, source="sources: {sky: {file: a.exr, recipe: zebra}}"))
    assert found.endswith("r10, r11 and 3 more")


def test_empty_sections_are_told(problems):
    assert problems("skykiln: 1\nrecipes: {}\n") == [
        "pipeline.yaml:1: sources: missing; allowed: a mapping with at least one entry",
        "pipeline.yaml:2: recipes: found an empty mapping; allowed: a mapping with at least one entry",
    ]


def test_all_mistakes_of_a_file_are_told_at_once_in_order_of_lines(problems):
    text = """skykiln: 2
cube_axes: up
recipes:
  landmark:
    face_size: 300
    specular: {level: 8}
    pack:
      - {container: png, pixels: rgba16f}
  interior:
    face_size: 32
    sun: {action: remove}
sources:
  sky: {file: 3, recipe: landmerk}
  ../up: {file: x.exr, recipe: interior}
  rooms: {files: "*.exr", recipe: interior, yaw: 3}
"""
    keys = [": ".join(problem.split(": ")[:2]) for problem in problems(text)]
    assert keys == [
        "pipeline.yaml:1: skykiln",
        "pipeline.yaml:2: cube_axes",
        "pipeline.yaml:5: recipes.landmark.face_size",
        "pipeline.yaml:6: recipes.landmark.specular.level",
        "pipeline.yaml:8: recipes.landmark.pack[0].container",
        "pipeline.yaml:9: recipes.interior.specular.levels",
        "pipeline.yaml:11: recipes.interior.sun.action",
        "pipeline.yaml:13: sources.sky.file",
        "pipeline.yaml:13: sources.sky.recipe",
        "pipeline.yaml:14: sources.'../up'",
        "pipeline.yaml:15: sources.rooms.yaw",
        "pipeline.yaml:15: sources.rooms.files",
    ]


GLOB = 'sources:\n  rooms:\n    files: "rooms/**/*"\n    recipe: plain\n'


def test_glob_without_a_match_is_told(problems, tmp_path):
    assert problems(lines(source=GLOB)) == [
        f"pipeline.yaml:5: sources.rooms.files: no file matches 'rooms/**/*' in {tmp_path}"
    ]


def test_each_that_names_no_file_is_told_with_the_nearest(problems):
    source = GLOB + "    each:\n      stair_1:\n        exposure_ev: 1"
    assert problems(lines(source=source), ["rooms/stair_01.exr"]) == [
        "pipeline.yaml:8: sources.rooms.each.stair_1: names no file of the glob; did you mean 'stair_01'?"
    ]


def test_wrong_value_and_recipe_below_each_are_told_at_their_lines(problems):
    source = GLOB + "    each:\n      a:\n        exposure_ev: x\n      b:\n        recipe: plane"
    assert problems(lines(source=source), ["rooms/a.exr", "rooms/b.exr"])[0] == (
        "pipeline.yaml:9: sources.rooms.each.a.exposure_ev: found 'x'; allowed: a number from -32 to 32"
    )
    source = GLOB + "    each:\n      b:\n        recipe: plane"
    assert problems(lines(source=source)) == [
        "pipeline.yaml:9: sources.rooms.each.b.recipe: no recipe is called 'plane'; did you mean 'plain'?"
    ]


def test_two_files_of_one_glob_with_one_name_are_told(problems):
    assert problems(lines(source=GLOB), ["rooms/a.exr", "rooms/a.hdr"]) == [
        "pipeline.yaml:5: sources.rooms.files: rooms/a.exr and rooms/a.hdr give the same name 'rooms/a'"
    ]


def test_one_name_from_two_entries_is_told(problems):
    source = GLOB + "  rooms/a: {file: other.exr, recipe: plain}"
    assert problems(lines(source=source), ["rooms/a.exr"]) == [
        "pipeline.yaml:7: sources.rooms/a: the probe 'rooms/a' is already made by another file or entry"
    ]


def test_names_that_differ_only_in_case_are_told(problems):
    source = "sources:\n  Noon: {file: a.exr, recipe: plain}\n  noon: {file: b.exr, recipe: plain}"
    assert problems(lines(source=source)) == [
        "pipeline.yaml:5: sources.noon: 'noon' and 'Noon' are one folder where case is ignored"
    ]


def test_a_probe_can_not_lie_in_the_folder_of_another(problems):
    source = "sources:\n  hall/a: {file: a.exr, recipe: plain}\n  hall: {file: b.exr, recipe: plain}"
    assert problems(lines(source=source)) == [
        "pipeline.yaml:4: sources.hall/a: 'hall' is a probe, so 'hall/a' can't lie in its folder"
    ]


@pytest.mark.parametrize(
    ("name", "told"),
    [
        ("../up", "may not start with a dot, as '..' does"),
        ("a/../../up", "may not start with a dot, as '..' does"),
        (".hidden", "may not start with a dot, as '.hidden' does"),
        ("/etc", "may not be empty"),
        ("", "may not be empty"),
        ("a//b", "may not be empty"),
        ("a/", "may not be empty"),
        ("' '", "may not be empty"),
        ("a\\b", "may not hold a backslash"),
        ('"a\\tb"', "may not hold unprintable characters"),
        ("x" * 200, "may hold at most 180 bytes"),
    ],
)
def test_names_that_could_leave_the_build_folder_are_refused(problems, name, told):
    key = name if name[:1] in "'\"" and name else f"'{name}'"
    (found,) = problems(lines(source=f"sources:\n  {key}: {{file: a.exr, recipe: plain}}"))
    assert found.startswith("pipeline.yaml:4: sources.")
    assert told in found


def test_file_names_that_make_no_safe_name_are_told_on_one_line(problems):
    (found,) = problems(lines(source=GLOB), ["rooms/a\nb.exr"])
    assert found == (
        "pipeline.yaml:5: sources.rooms.files: rooms/a\\nb.exr: a name may not hold unprintable characters"
    )


def test_dots_behind_a_wildcard_are_refused(problems):
    source = 'sources:\n  rooms: {files: "rooms/*/../../*.exr", recipe: plain}'
    assert problems(lines(source=source)) == [
        "pipeline.yaml:4: sources.rooms.files: '..' may not follow a wildcard"
    ]


def test_file_and_files_together_are_told(problems):
    source = 'sources:\n  sky:\n    files: "*.exr"\n    file: a.exr\n    recipe: plain'
    assert problems(lines(source=source), ["a.exr"]) == [
        "pipeline.yaml:6: sources.sky.file: found beside 'files'; give one of the two"
    ]


@pytest.mark.parametrize(
    ("make", "told"),
    [
        (lambda path: None, "no such file; give the pipeline file with -f"),
        (lambda path: path.mkdir(), "is not a file; name the pipeline file itself"),
        (lambda path: os.mkfifo(path), "is not a file; name the pipeline file itself"),
    ],
)
def test_pipeline_that_is_no_file_is_told(tmp_path, make, told):
    path = tmp_path / "night.yaml"
    make(path)
    with pytest.raises(PipelineError) as caught:
        load_pipeline(path)
    assert caught.value.problems == [f"{path}: {told}"]
