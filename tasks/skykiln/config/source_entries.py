"""Entries under `sources`: each judged by itself, then what its keys say together."""

from .judging import judged
from .problems import nearest, shown
from .source_model import (
    CUBES_OF_ANY_AXES,
    GROUND_ALLOWED,
    SKY_ALONE,
    FacesSource,
    FileSource,
    GlobSource,
)

KINDS = {"file": FileSource, "files": GlobSource, "faces": FacesSource}
MEASURED = ("horizontal_lux", "sun_lux", "patch", "white_luminance")


def valid_sources(entries, recipe_names, report):
    """Source objects by name; `report(path, text)` is called for each mistake."""
    sources = {}
    for name, entry in entries.items():
        path = ("sources", name)
        source = _source(entry, path, report)
        if source is not None:
            sources[name] = source
            for steps, text in _faults_together(source):
                report((*path, *steps), text)
        for steps, recipe in _asked_recipes(entry):
            if isinstance(recipe, str) and recipe not in recipe_names:
                text = f"no recipe is called {shown(recipe)}; {nearest(recipe, recipe_names)}"
                report((*path, *steps), text)
    return sources


def _source(entry, path, report):
    given = [key for key in KINDS if isinstance(entry, dict) and key in entry]
    if isinstance(entry, dict) and not given:
        report(path, "file, files or faces: missing")
        key = "files" if "each" in entry else "file"
        judged(KINDS[key], {**entry, key: "any"}, path, report, _mended_source)
        return None
    kind = next((key for key in ("files", "faces") if key in given), "file")
    for other in set(given) - {kind}:
        report((*path, other), f"found beside '{kind}'; give one of the two")
        entry = {key: value for key, value in entry.items() if key != other}
    if kind in given and kind != "files" and "each" in entry:
        report((*path, "each"), f"found beside '{kind}'; it goes with files")
        entry = {key: value for key, value in entry.items() if key != "each"}
    return judged(KINDS[kind], entry, path, report, _mended_source)[0]


def _mended_source(entry):
    return {"recipe": "", **entry}


def _faults_together(source):
    """(steps, sentence) of keys that don't go together, in the entry or with the changes of one file."""
    own = list(_faults(source))
    yield from ((keys[:1], text) for keys, text in own)
    for short, changes in source.each.items() if isinstance(source, GlobSource) else ():
        given = changes.model_fields_set
        update = {key: getattr(changes, key) for key in given if key != "recipe"}
        for keys, text in _faults(source.model_copy(update=update)):
            if (keys, text) not in own:
                yield ("each", short, next(key for key in keys if key in given)), text


def _faults(source):
    """(keys that don't go together, the first to be named; sentence)"""
    for key in MEASURED:
        if source.exposure_ev and getattr(source, key) is not None:
            text = f"found beside {key}, which decides the scale; remove one of the two"
            yield ("exposure_ev", key), text
            break
    if source.layout in SKY_ALONE and source.ground is None:
        text = f"found '{source.layout}', the sky alone; give ground: {GROUND_ALLOWED}"
        yield ("layout", "ground"), text
    six = isinstance(source, FacesSource)
    if six and source.layout != "auto":
        yield ("layout",), "found beside faces, which are a layout of their own; remove it"
    if source.face_axes != "auto" and source.layout not in CUBES_OF_ANY_AXES and not six:
        text = f"found beside layout {source.layout}, whose images lie in one way alone; remove it"
        yield ("face_axes", "layout"), text
    yield from _patch_faults(source.patch)


def _patch_faults(patch):
    if patch is None:
        return
    card = (patch.reflectance, patch.lux)
    if (patch.cd_m2 is None) == (None in card) or (patch.cd_m2 is not None and any(card)):
        yield ("patch",), "allowed: cd_m2, or reflectance and lux, besides direction and size_deg"
    if not any(patch.direction):
        yield ("patch",), "found the direction 0, 0, 0; allowed: one that points somewhere"


def _asked_recipes(entry):
    """(steps, value) of every `recipe` of an entry, which may be wrong in other ways."""
    if not isinstance(entry, dict):
        return
    yield ("recipe",), entry.get("recipe")
    each = entry.get("each")
    for short, changes in each.items() if isinstance(each, dict) else ():
        if isinstance(changes, dict):
            yield ("each", short, "recipe"), changes.get("recipe")
