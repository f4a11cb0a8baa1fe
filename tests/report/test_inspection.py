"""`inspect`: the numbers of files whose values are known, every kind of broken file, pictures."""

import json
import os

import numpy as np
import pytest
from PIL import Image

from skykiln.errors import FileError
from skykiln.formats.dds import DdsTexture, write_dds
from skykiln.formats.exr_levels import ExrLevels, write_exr_levels
from skykiln.formats.ktx2 import Ktx2Texture, write_ktx2
from skykiln.light.sample_cube import sample_cube
from skykiln.report.inspection import Inspection, broken_file_rules

ABOUT = {"content": "specular", "cube_axes": "negate_x", "roughness": [0, 0.5, 1], "storage_ev": 2}


def random_levels(size=4, count=3):
    rng = np.random.default_rng(0)
    return tuple(rng.random((6, size >> k, size >> k, 3)).astype(np.float32) for k in range(count))


def ktx2(levels, pixels="rgba16f", about=ABOUT, compress=0):
    return write_ktx2(Ktx2Texture(pixels, levels, {"skykiln": json.dumps(about)}), compress)


@pytest.fixture
def written(tmp_path):
    def path_of(data, name="file.bin"):
        (tmp_path / name).write_bytes(data)
        return tmp_path / name

    return path_of


def rows(path):
    """The table's cells below its heading."""
    lines = list(Inspection(path).lines())
    first = next(number for number, line in enumerate(lines) if line.split()[0] == "level")
    return [line.replace(" x ", "x").split() for line in lines[first + 1 :] if line.split()[0].isdecimal()]


def test_levels_of_a_constant_cube_have_that_value_and_four_pi_times_it(written):
    levels = tuple(np.full((6, n, n, 3), [0.5, 1, 2], np.float32) for n in (4, 2, 1))
    found = rows(written(ktx2(levels)))
    energy = [f"{4 * np.pi * value:.5g}" for value in (0.5, 1, 2)]
    assert found == [
        [str(k), f"{n}x{n}", rough, "0.5", "1.1667", "2", *energy]
        for k, (n, rough) in enumerate([(4, "0"), (2, "0.5"), (1, "1")])
    ]


@pytest.mark.parametrize("container", ["ktx2", "dds", "exr"])
def test_header_metadata_and_sizes_are_told_of_every_container(written, container):
    levels = random_levels()
    data = {
        "ktx2": ktx2(levels, "rgb9e5", compress=3),
        "dds": write_dds(DdsTexture("rgb9e5", levels)),
        "exr": write_exr_levels(ExrLevels("half", levels, {"skykiln": json.dumps(ABOUT)})),
    }[container]
    first, *others = Inspection(written(data)).lines()
    pixels, gpu = ("half", 0) if container == "exr" else ("rgb9e5", 4 * 6 * (16 + 4 + 1))
    said = f"{container}, {pixels}, cube map of 6 x 4 x 4, 3 levels, {len(data)} bytes, {gpu} on the GPU"
    assert first.endswith(said)
    told = "\n".join(others)
    assert ("vkFormat 123" in told) == (container == "ktx2")
    assert ("dxgiFormat 67" in told) == (container == "dds")
    assert ("as stored; radiance is 2^2 times that" in told) == (container != "dds")


@pytest.mark.parametrize(("pixels", "channels"), [("rg16f", 2), ("r16f", 1)])
def test_table_is_told_without_energy(written, tmp_path, pixels, channels):
    table = np.random.default_rng(0).random((1, 8, 8, channels)).astype(np.float32)
    path = written(write_ktx2(Ktx2Texture(pixels, (table,))))
    Inspection(path).draw(tmp_path / "table.png")
    assert len(rows(path)[0]) == 6
    assert "table of 8 x 8, 1 level," in next(Inspection(path).lines())
    with pytest.raises(FileError, match="a table has no directions"):
        Inspection(path).samples((1, 0, 0), 0)


def test_samples_are_those_of_a_sampler(written):
    levels = random_levels()
    stored = Inspection(written(ktx2(levels))).texture.levels
    for direction, level in (((1, 0.2, -0.3), 0), ((-1, 0, 0), 1.25), ((0.1, -5, 1), 9)):
        told = Inspection(written(ktx2(levels))).samples(direction, level)
        expected = sample_cube(stored, np.array([direction]), level)[0]
        np.testing.assert_allclose([float(part) for part in told.split()], expected, rtol=1e-5)


@pytest.mark.parametrize("size", [4, 5, 512])
def test_picture_shows_all_levels_of_any_size(written, tmp_path, size):
    levels = tuple(np.full((6, max(1, size >> k), max(1, size >> k), 3), 0.5, np.float32) for k in range(3))
    Inspection(written(ktx2(levels))).draw(tmp_path / "levels.png")
    shown = min(size, 256)
    with Image.open(tmp_path / "levels.png") as picture:
        assert picture.size == (3 * 4 * shown, 3 * shown)
        middles = [picture.getpixel((int((4 * k + 1.5) * shown), int(1.5 * shown))) for k in range(3)]
    assert len(set(middles)) == 1 != middles[0]


def test_picture_that_can_not_be_written_is_told(written, tmp_path):
    with pytest.raises(FileError, match="can't be written: No such file or directory"):
        Inspection(written(ktx2(random_levels()))).draw(tmp_path / "missing" / "levels.png")


@pytest.mark.parametrize("compress", [0, 3])
@pytest.mark.parametrize("pixels", ["rgba16f", "rgb9e5", "r11g11b10f", "bc6h"])
def test_sound_files_break_no_rule(written, pixels, compress):
    assert broken_file_rules(written(ktx2(random_levels(), pixels, compress=compress))) == []
    assert broken_file_rules(written(write_dds(DdsTexture(pixels, random_levels())))) == []
    assert broken_file_rules(written(write_exr_levels(ExrLevels("float", random_levels())))) == []


def test_every_broken_rule_is_named_at_once(written):
    data = bytearray(ktx2(random_levels()))
    data[16] = 1  # typeSize
    data[36] = 5  # faceCount
    broken = broken_file_rules(written(bytes(data)))
    assert [rule.split()[0] for rule in broken] == ["typeSize", "faceCount"]


@pytest.mark.parametrize(
    ("half", "told"),
    [(0x7E00, "NaN"), (0x7C00, "infinite"), (0xBC00, "negative")],
)
def test_pixels_that_are_no_light_are_named(written, half, told):
    data = write_dds(DdsTexture("rgba16f", random_levels()))
    data = data[:148] + half.to_bytes(2, "little") + data[150:]
    assert broken_file_rules(written(data)) == [f"level 0: 1 texels are {told}"]


@pytest.mark.parametrize("compress", [0, 3])
def test_reserved_modes_of_bc6h_are_named(written, compress):
    data = write_dds(DdsTexture("bc6h", random_levels()))
    data = data[:148] + b"\x13" + data[149:-16] + b"\x1f" + data[-15:]
    assert broken_file_rules(written(data)) == ["2 BC6H blocks have a reserved mode"]


@pytest.mark.parametrize(
    ("change", "told"),
    [
        ({"cube_axes": "up"}, "cube_axes is 'up', none of direct, negate_x, negate_z"),
        ({"storage_ev": -1}, "storage_ev is -1, no whole number from 0"),
        ({"roughness": [0, 1]}, "roughness is no list that rises from 0 to at most 1, one per level"),
        ({"roughness": [0, 1, 0.5]}, "roughness is no list that rises from 0 to at most 1, one per level"),
        ({"roughness": ["0", 1, 2]}, "roughness is no list that rises from 0 to at most 1, one per level"),
    ],
)
def test_broken_rules_of_skykiln_s_own_key_are_named(written, change, told):
    path = written(ktx2(random_levels(), about={**ABOUT, **change}))
    assert broken_file_rules(path) == [f"key skykiln: {told}"]
    assert list(Inspection(path).lines())


def test_own_key_that_is_no_json_is_named_and_inspected_all_the_same(written):
    path = written(write_ktx2(Ktx2Texture("rgba16f", random_levels(), {"skykiln": "noon"})))
    assert broken_file_rules(path) == ["key skykiln: not a JSON object"]
    assert "skykiln: noon" in list(Inspection(path).lines())


def test_cut_zstandard_frame_is_named(written):
    levels = tuple(np.full((6, n, n, 3), 0.25, np.float32) for n in (64, 32))
    data = ktx2(levels, about={}, compress=3)
    spoiled = data[:-6] + bytes(6)
    broken = broken_file_rules(written(spoiled))
    assert broken
    assert all("level 0" in rule for rule in broken)


@pytest.mark.parametrize("make", [write_dds, write_ktx2, write_exr_levels], ids=["dds", "ktx2", "exr"])
def test_every_truncation_is_broken(written, make):
    kind = {write_dds: DdsTexture, write_ktx2: Ktx2Texture, write_exr_levels: ExrLevels}[make]
    data = make(kind("half" if kind is ExrLevels else "rgba16f", random_levels(2, 2)))
    for length in range(4, len(data) - 1, 13):
        path = written(data[:length])
        assert broken_file_rules(path)
        with pytest.raises(FileError):
            Inspection(path)


@pytest.mark.parametrize(
    ("make", "told"),
    [
        (lambda path: None, "can't be read: No such file or directory"),
        (lambda path: path.mkdir(), "is not a file"),
        (lambda path: os.mkfifo(path), "is not a file"),
        (lambda path: path.write_bytes(b""), "neither KTX2, nor DDS, nor OpenEXR"),
        (lambda path: path.write_text("skykiln: 1"), "neither KTX2, nor DDS, nor OpenEXR"),
    ],
)
def test_what_is_no_packed_file_is_told(tmp_path, make, told):
    path = tmp_path / "file.ktx2"
    make(path)
    for read in (Inspection, broken_file_rules):
        with pytest.raises(FileError) as caught:
            read(path)
        assert str(caught.value).startswith(f"{path}: {told}")
