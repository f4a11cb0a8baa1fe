"""The viewer's page: what is in it, that it asks for nothing, and what it is told when files are missing."""

import base64
import json
import re

import numpy as np
import pytest

from skykiln.errors import SkykilnError
from skykiln.formats.ktx2 import Ktx2Texture, read_ktx2, write_ktx2
from skykiln.report.viewer import probe_viewer

ROUGHNESS = [0, 0.25, 0.5, 1]


@pytest.fixture
def published(tmp_path):
    """A folder with a probe of 512 texels, packed with Zstandard."""
    return written_probe(tmp_path)


def written_probe(folder, name="ferry_noon", size=512, container="ktx2", primaries="rec709"):
    folder.mkdir(exist_ok=True)
    about = {"name": name, "cube_axes": "direct", "units": "cd/m2", "storage_ev": 3}
    levels = tuple(np.full((6, size >> k, size >> k, 3), k + 1, np.float32) for k in range(4))
    chain_about = {**about, "roughness": ROUGHNESS}
    write(folder / "specular.rgb9e5.ktx2", levels, chain_about, primaries, 1)
    write(folder / "irradiance.rgb9e5.ktx2", levels[-1:], about, primaries)
    table = Ktx2Texture("rg16f", (np.zeros((1, 4, 4, 2), np.float32),), {})
    (folder / "brdf.ktx2").write_bytes(write_ktx2(table))
    entry = {"container": container, "cube_axes": "direct"}
    record = {
        "name": name, "units": "cd/m2", "storage_ev": 3, "sun": None,
        "specular": {"files": [{"file": "specular.rgb9e5.ktx2", **entry}]},
        "irradiance": {"files": [{"file": "irradiance.rgb9e5.ktx2", **entry}]},
    }  # fmt: skip
    (folder / "probe.json").write_text(json.dumps(record))
    return folder


def write(path, levels, about, primaries, compress=0):
    texture = Ktx2Texture("rgb9e5", levels, {"skykiln": json.dumps(about)}, primaries)
    path.write_bytes(write_ktx2(texture, compress))


def block(page, key):
    (text,) = re.findall(rf'<script type="[^"]*" id="{key}">(.*?)</script>', page.decode(), re.DOTALL)
    return text


def copy_in(page, key):
    return read_ktx2(base64.b64decode(block(page, key)), key)


def test_page_holds_plain_copies_of_faces_up_to_256_and_says_what_it_left_out(published):
    viewer = probe_viewer(published, published / "brdf.ktx2")
    assert (viewer.file, viewer.left_out) == ("specular.rgb9e5.ktx2", 1)
    found = copy_in(viewer.page, "specular")
    assert [level.shape[1] for level in found.levels] == [256, 128, 64]
    assert found.levels[0][0, 0, 0, 0] == 2  # the second level's
    assert json.loads(found.metadata["skykiln"])["roughness"] == ROUGHNESS[1:]
    assert json.loads(block(viewer.page, "facts"))["first_level"] == 1
    assert copy_in(viewer.page, "irradiance").levels[0].shape == (6, 64, 64, 3)
    assert copy_in(viewer.page, "brdf").pixels == "rg16f"


def test_full_page_holds_every_level(published):
    viewer = probe_viewer(published, published / "brdf.ktx2", full=True)
    assert viewer.left_out == 0
    assert [level.shape[1] for level in copy_in(viewer.page, "specular").levels] == [512, 256, 128, 64]


def test_colours_of_other_primaries_come_to_the_screen_as_what_they_are(tmp_path):
    folder = written_probe(tmp_path / "z", size=8, primaries="rec2020")
    facts = json.loads(block(probe_viewer(folder, folder / "brdf.ktx2").page, "facts"))
    # From BT.2020 to BT.709 (ITU-R BT.2407-0) and luminance (BT.2020-2, table 4); figures from memory.
    matrix = [[1.6605, -0.5876, -0.0728], [-0.1246, 1.1329, -0.0083], [-0.0182, -0.1006, 1.1187]]
    np.testing.assert_allclose(facts["to_rec709"], matrix, atol=1e-4)
    np.testing.assert_allclose(facts["luminance_weights"], [0.2627, 0.6780, 0.0593], atol=1e-4)


def test_page_names_no_address_and_forbids_requests(published):
    page = probe_viewer(published, published / "brdf.ktx2").page.decode()
    assert "default-src 'none'" in page
    assert not re.findall(r"https?:|url\(|@import|\bfetch\(|XMLHttpRequest", page)
    assert not re.findall(r'\b(?:src|href)="(?!data:)', page)


def test_name_of_a_probe_is_no_markup(tmp_path):
    folder = written_probe(tmp_path / "x", "</script><script>alert(1)</script>", 8)
    page = probe_viewer(folder, folder / "brdf.ktx2").page.decode()
    assert "alert(1)<" not in page.replace("&lt;", "").replace("\\u003c", "")
    assert json.loads(block(page.encode(), "facts"))["name"] == "</script><script>alert(1)</script>"


def test_name_that_looks_like_a_place_in_the_template_stays_a_name(tmp_path):
    folder = written_probe(tmp_path / "x", "{{copies}}", 8)
    assert "<h1>{{copies}}</h1>" in probe_viewer(folder, folder / "brdf.ktx2").page.decode()


def test_missing_pack_is_told_with_those_there_are(published, tmp_path):
    with pytest.raises(SkykilnError, match=r"no pack x.ktx2 among its files; KTX2 files: specular.rgb9e5"):
        probe_viewer(published, published / "brdf.ktx2", "x.ktx2")
    other = written_probe(tmp_path / "y", size=8, container="dds")
    with pytest.raises(SkykilnError, match="none; add a ktx2 pack to its recipe"):
        probe_viewer(other, other / "brdf.ktx2")


def test_probe_that_was_never_published_asks_for_a_bake(tmp_path):
    with pytest.raises(SkykilnError, match="bake the probe first"):
        probe_viewer(tmp_path / "none", tmp_path / "brdf.ktx2")
