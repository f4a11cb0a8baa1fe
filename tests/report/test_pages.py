"""Pages of a night: whole, escaped, and without a request to anywhere."""

import re
from html.parser import HTMLParser

import pytest
from nights import CHANGE, LIGHT, entry, night, troubled_night

from skykiln.report.pages import index_page, probe_page, static_file

EVIL = "<script>alert(1)<script>"
PROBE = {
    "name": "quay",
    "source": {
        "file": "quay.exr", "width": 64, "height": 32, "scale": 1.0,
        "repaired": {"nan": 0, "inf": 2, "negative": 1},
    },
    "recipe": "landmark",
    "units": "cd/m2",
    "storage_ev": 0,
    "specular": {
        "levels": [
            {"level": 0, "roughness": 0.0, "face_size": 8, "seam": 1.2},
            {"level": 1, "roughness": 1.0, "face_size": 1, "seam": None},
        ],
        "files": [
            {
                "file": "specular.rgba16f.ktx2", "bytes": 10, "gpu_bytes": 20,
                "coding_error": {"flux": 0.001, "log2_rms": 0.01},
            }
        ],
    },
    "irradiance": {"face_size": 32, "files": [], "sh_smallest": -0.1},
    "sun": {"direction": [1.0, 0.0, 0.0], "illuminance": 9e4, "angular_radius_deg": 0.27},
    "energy": {
        "mean_radiance": [1.0, 2.0, 3.0], "horizontal_illuminance": 98000.0, "lost_to_clamping": 0.0,
        "brightest": {"direction": [0.0, 1.0, 0.0], "luminance": 5e4},
    },
    "bytes": {"disk": 10, "gpu": 20},
    "audit": None,
}  # fmt: skip
LOOKS = {
    "brightest": PROBE["energy"]["brightest"],
    "panorama_size": [512, 256],
    "luminance_range": [256.0, 32768.0],
    "scene_difference": {"median": 0.003, "percentile_99": 0.2},
}


class Page(HTMLParser):
    """Tags with their attributes, and the text outside scripts."""

    def __init__(self, data):
        super().__init__()
        self.tags, self.text = [], ""
        self.feed(data.decode())

    def handle_starttag(self, tag, attrs):
        self.tags.append((tag, dict(attrs)))

    def handle_data(self, data):
        self.text += data

    def all(self, tag):
        return [attributes for name, attributes in self.tags if name == tag]


def _index(record, before=None, others=(), paged=()):
    names = {each["name"] for each in [*record["probes"], *others]}
    return Page(index_page(record, before, list(others), names, set(paged)))


def _probe(each, probe=PROBE, looks=LOOKS):
    return Page(probe_page(night(each), each, probe, looks))


def test_first_page_opens_with_the_sentence_and_has_a_row_for_every_probe():
    page = _index(troubled_night())
    assert "6 probes: 1 rebuilt, 3 unchanged, 1 failed, 1 held by gates." in page.text
    rows = [attributes for attributes in page.all("tr") if "data-words" in attributes]
    assert [row["data-words"].split()[0] for row in rows] == ["ferry", "hall", "lamp", "pier", "quay", "roof"]


@pytest.mark.parametrize("page", ["index", "probe"])
def test_names_are_text_and_nothing_else(page):
    failure = {"file": EVIL, "stage": EVIL, "cause": EVIL}
    each = entry(EVIL, state="failed", failure=failure, recipe=EVIL, change=CHANGE, audit=None)
    made = _index(night(each), paged=[EVIL]) if page == "index" else _probe(each)
    scripts = made.all("script")
    assert scripts == ([{"src": "table.js"}] if page == "index" else [])
    assert EVIL in made.text


def test_names_are_quoted_in_addresses():
    page = _index(night(entry("a b/50% #1?")), paged=["a b/50% #1?"])
    assert page.all("a")[0]["href"] == "probes/a%20b/50%25%20%231%3F/index.html"


def test_pictures_say_what_they_show_and_keep_their_place_before_they_are_there():
    pages = [_index(troubled_night()), _probe(entry("quay", state="rebuilt", change=CHANGE))]
    pictures = [picture for page in pages for picture in page.all("img")]
    assert len(pictures) > 10
    assert all({"alt", "width", "height"} <= picture.keys() for picture in pictures)


def test_pages_ask_nobody_for_anything():
    for data in (index_page(troubled_night(), None, [], set(), set()), static_file("report.css")):
        assert not re.search(rb"(https?:)?//[a-z]|@import|url\(", data)


def test_sun_is_marked_where_it_stands():
    page = _probe(entry("quay"))
    (mark,) = [attributes for attributes in page.all("span") if attributes.get("class") == "mark"]
    assert mark["style"] == "left:25.0%;top:50.0%"  # +x, a quarter from the left, on the horizon
    assert "the sun" in mark["title"]


def test_audit_of_a_level_stands_beside_it():
    worst = {"map": "level 1", "deviation": -0.004, "z": 2.5}
    audit = {"why": "", "texels": 200, "share_passed": 1.0, "worst": worst, "maps": []}
    audit["maps"] = [{"map": "all", "deviation": 0.1}, {"map": "level 1", "deviation": -0.0012}]
    page = _probe(entry("quay"), probe={**PROBE, "audit": audit})
    assert "audit: -0.12 % in the mean" in page.text
    assert "passed; 100 % of 200 texels within; worst 0.4 % at level 1, z 2.5" in page.text


def test_failed_probe_that_was_never_baked_has_a_page_with_its_cause():
    failure = {"file": "pier.exr", "stage": "panorama of pier", "cause": "pier.exr: the file ends early"}
    page = _probe(entry("pier", state="failed", failure=failure, audit=None), probe={}, looks={})
    assert "Nothing of it was ever published" in page.text and "earlier night" not in page.text
    assert "the file ends early" in page.text
    assert page.all("img") == []


def test_probes_that_came_and_went_are_told():
    before = night(entry("pier"), entry("roof", state="failed"))
    page = _index(night(entry("roof"), entry("quay")), before)
    for sentence in ("New: quay.", "No longer asked for: pier.", "Recovered: roof."):
        assert sentence in page.text


def test_probes_that_the_night_was_not_asked_for_are_shown_too():
    other = entry("roof", state="not asked for", light=LIGHT)
    assert "not asked for" in _index(night(entry("quay")), others=[other]).text
