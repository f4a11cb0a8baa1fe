"""The viewer: one HTML file that draws a probe from its packed bytes, in a browser, with WebGL2.

The page holds copies of the KTX2 files without supercompression, reads them itself, and asks for nothing
from outside. Its parts stand in `viewer_page/`: markup, style, shaders and scripts.
"""

import base64
import html
import json
from importlib.resources import files
from pathlib import Path
from typing import NamedTuple

from skykiln.errors import FileError, SkykilnError
from skykiln.formats.ktx2 import read_ktx2
from skykiln.formats.ktx2_copy import plain_copy
from skykiln.formats.texture_files import file_bytes
from skykiln.light.colour import SPACES, rgb_to_rgb, weights_of
from skykiln.light.quay_scene import DISTANCE, FIELD_OF_VIEW, QUAY_SCENE, TARGET
from skykiln.report.false_colour import COLOURS, MIDDLE_GREY, STOPS
from skykiln.report.inspection import ABOUT_KEY
from skykiln.report.pictures import exposure_for
from skykiln.report.ramp import linear_ramp

LARGEST_FACE = 256  # texels of a face in a page that was not asked for whole
_SCRIPTS = ("ktx2.js", "textures.js", "picture.js", "page.js")
_SHADERS = ("radiance.glsl", "display.glsl")


class Viewer(NamedTuple):
    """A page, and what it shows of a probe.

    left_out : how many of the largest levels are not in the page
    """

    page: bytes
    file: str
    left_out: int


def probe_viewer(published: Path, table: Path, pack=None, full=False) -> Viewer:
    """The page of a published probe.

    Parameters: published : the folder of probe.json; table : the BRDF table's KTX2 file
                pack : the specular file's name; none: the first KTX2 file
                full : faces of every size, else up to LARGEST_FACE

    Raises: SkykilnError where the probe was not published, or has no such KTX2 file
    """
    record = _published_record(published)
    specular, irradiance = _chosen_files(record, pack)
    data = file_bytes(published / specular)
    texture = read_ktx2(data, specular)
    sizes = [level.shape[1] for level in texture.levels]
    left_out = 0 if full else sum(size > LARGEST_FACE for size in sizes[:-1])
    copies = {
        "specular": plain_copy(data, specular, left_out, _cut_metadata(texture.metadata, left_out)),
        "irradiance": _whole_copy(published / irradiance),
        "brdf": _whole_copy(table),
    }
    facts = _facts(record, specular, texture, left_out)
    return Viewer(_assembled(record["name"], facts, copies), specular, left_out)


def _published_record(published):
    path = published / "probe.json"
    if not path.is_file():
        raise SkykilnError(f"{path}: is not there; bake the probe first")
    try:
        return json.loads(path.read_bytes())
    except ValueError as error:
        raise FileError(f"{path}: is no JSON ({error}); bake the probe again") from error


def _chosen_files(record, pack):
    """Names of the specular file and of an irradiance file beside it."""
    packed = _ktx2_files(record)
    chosen = next((file for file in packed if pack in (None, file)), None)
    if chosen is None:
        names = ", ".join(packed) or "none; add a ktx2 pack to its recipe"
        wanted = f"no pack {pack}" if pack else "nothing that the viewer reads"
        raise SkykilnError(f"{record['name']}: {wanted} among its files; KTX2 files: {names}")
    return chosen, next(e["file"] for e in record["irradiance"]["files"] if e["container"] == "ktx2")


def _ktx2_files(record):
    return [entry["file"] for entry in record["specular"]["files"] if entry["container"] == "ktx2"]


def _cut_metadata(metadata, first):
    about = json.loads(metadata[ABOUT_KEY])
    return {**metadata, ABOUT_KEY: json.dumps({**about, "roughness": about["roughness"][first:]})}


def _whole_copy(path):
    data = file_bytes(path)
    return plain_copy(data, path.name, 0, read_ktx2(data, path.name).metadata)


def _facts(record, specular, texture, left_out):
    """What the scripts need beside the files themselves."""
    space = SPACES.get(texture.primaries, SPACES["rec709"])
    faces = texture.levels[min(2, len(texture.levels) - 1)]  # small, and near to what is seen
    return {
        "name": record["name"],
        "file": specular,
        "pixels": texture.pixels,
        "units": record["units"],
        "others": [other for other in _ktx2_files(record) if other != specular],
        "first_level": left_out,
        "sun": record["sun"] is not None,
        "exposure": exposure_for(faces.astype("f8") * 2.0 ** record["storage_ev"]),
        "luminance_weights": weights_of(space).tolist(),
        "to_rec709": rgb_to_rgb(space, SPACES["rec709"]).tolist(),
        "ramp": linear_ramp(COLOURS).tolist(),
        "stops": STOPS,
        "middle_grey": MIDDLE_GREY,
        "scene": _scene_record(),
    }


def _scene_record():
    shapes = [
        {"start": s.start, "end": s.end, "radius": s.radius, **s.material._asdict()} for s in QUAY_SCENE
    ]
    return {"shapes": shapes, "target": TARGET, "distance": DISTANCE, "field_of_view": FIELD_OF_VIEW}


def _assembled(name, facts, copies):
    folder = files(__package__) / "viewer_page"
    parts = {part: (folder / part).read_text("utf-8") for part in ("page.css", *_SHADERS, *_SCRIPTS)}
    page = (folder / "page.html").read_text("utf-8")
    blocks = {
        "name": html.escape(name),
        "style": f"<style>\n{parts['page.css']}</style>",
        "facts": _data_block("facts", "application/json", json.dumps(facts).replace("<", "\\u003c")),
        "copies": "\n".join(
            _data_block(key, "text/plain", base64.b64encode(copy).decode()) for key, copy in copies.items()
        ),
        "shaders": "\n".join(
            _data_block(shader.removesuffix(".glsl"), "x-shader/x-fragment", parts[shader])
            for shader in _SHADERS
        ),
        "scripts": "\n".join(f"<script>\n{parts[script]}</script>" for script in _SCRIPTS),
    }
    head, *pieces = page.split("{{")
    for piece in pieces:
        key, rest = piece.split("}}", 1)
        head += blocks[key] + rest
    return head.encode()


def _data_block(key, kind, text):
    return f'<script type="{kind}" id="{key}">{text}</script>'
