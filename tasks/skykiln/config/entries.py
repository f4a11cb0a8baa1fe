"""Entries under `recipes` and `sources`: each judged by itself, then what its keys say together.

A wrong key is reported and the rest of its entry judged on without it, so that all mistakes show at once.
"""

import difflib
import itertools

from .expand import chain_length, pack_of
from .model import CODINGS, FileSource, GlobSource, Recipe
from .problems import nearest, shown, validated

# What stands in for a value that was told to be wrong, where the entry can't be judged without one.
STAND_INS = {"container": "ktx2", "pixels": "rgba16f"}


def valid_recipes(entries, cube_axes, report):
    """Recipe objects by name; `report(path, text)` is called for each mistake.

    Parameters: cube_axes : those at the top of the file
    """
    recipes = {}
    for name, entry in entries.items():
        path = ("recipes", name)
        recipe, wrong = _judged(Recipe, entry, path, report, _mended_recipe)
        if recipe is not None:
            recipes[name] = recipe
            for steps, text in _recipe_faults(recipe, wrong, cube_axes):
                report((*path, *steps), text)
    return recipes


def valid_sources(entries, recipe_names, report):
    """FileSource and GlobSource objects by name; `report(path, text)` is called for each mistake."""
    sources = {}
    for name, entry in entries.items():
        path = ("sources", name)
        source = _source(entry, path, report)
        if source is not None:
            sources[name] = source
            for steps, text in _light_faults(source):
                report((*path, *steps), text)
        for steps, recipe in _asked_recipes(entry):
            if isinstance(recipe, str) and recipe not in recipe_names:
                text = f"no recipe is called {shown(recipe)}; {nearest(recipe, recipe_names)}"
                report((*path, *steps), text)
    return sources


def _judged(model, entry, path, report, mended):
    """(object, paths that were wrong); the object is what the rest makes, None if that makes none.

    Parameters: mended : function that puts stand-ins where something needed was wrong or is missing
    """
    wrong = set()

    def note(steps, text):
        report(steps, text)
        wrong.add(steps[len(path) :])

    judged = validated(model, entry, path, note)
    if judged is None and isinstance(entry, dict):
        judged = validated(model, mended(_without(entry, wrong)), path, lambda steps, text: None)
    return judged, wrong


def _without(data, wrong, path=()):
    """Data without the values of mappings to which the paths in `wrong` lead."""
    if isinstance(data, dict):
        steps = {key: (*path, key) for key in data}
        return {key: _without(data[key], wrong, steps[key]) for key in data if steps[key] not in wrong}
    if isinstance(data, list):
        return [_without(item, wrong, (*path, index)) for index, item in enumerate(data)]
    return data


def _mended_recipe(entry):
    if "pack" not in entry:
        return entry
    packs = [{**STAND_INS, **(item if isinstance(item, dict) else {})} for item in entry["pack"]]
    return {**entry, "pack": packs}


def _mended_source(entry):
    return {"recipe": "", **entry}


def _doubtful(wrong, section, *keys):
    """Whether what the user meant by one of the keys of a section is not known: it was wrong, the whole
    section was, or an unknown key is near enough to be a slip for it."""
    if any(section[: len(path)] == path for path in wrong):
        return True
    found = [path[-1] for path in wrong if path[:-1] == section]
    return any(difflib.get_close_matches(str(key), keys, n=1, cutoff=0.6) for key in found)


def _recipe_faults(recipe, wrong, cube_axes):
    sized = not _doubtful(wrong, (), "face_size")
    counted = not _doubtful(wrong, ("specular",), "levels")
    if not _doubtful(wrong, ("specular",), "roughness"):
        known = counted and (sized or recipe.specular.levels != "full")
        yield from _roughness_faults(recipe.specular.roughness, chain_length(recipe) if known else None)
    if counted and sized:
        yield from _level_faults(recipe)
    if not _doubtful(wrong, (), "pack"):
        yield from _coding_faults(recipe.pack, wrong)
        yield from _pack_faults(recipe, wrong, cube_axes)


def _level_faults(recipe):
    steps, size, levels = ("specular", "levels"), recipe.face_size, chain_length(recipe)
    if levels is None:
        yield steps, "found 'full' with face_size auto; allowed: a whole number, or give face_size a number"
    elif size != "auto" and levels > size.bit_length():
        most = f"a face of {size} texels has at most {size.bit_length()} levels, down to 1 texel"
        yield steps, f"found {levels}; {most}"


def _roughness_faults(numbers, levels):
    """`levels` is None where it isn't known."""
    steps = ("specular", "roughness")
    if numbers == "linear":
        return
    if len(numbers) != (levels or len(numbers)):
        yield steps, f"found {len(numbers)} numbers; allowed: one per level, {levels}"
    rising = all(low < high for low, high in itertools.pairwise(numbers))
    if not (numbers[0] == 0 and rising and numbers[-1] <= 1):
        found = ", ".join(f"{number:g}" for number in numbers)
        yield steps, f"found {found}; allowed: numbers that start with 0 and rise to at most 1"


def _coding_faults(entries, wrong):
    for index, entry in enumerate(entries):
        if _doubtful(wrong, ("pack", index), *STAND_INS):
            continue
        container, allowed = entry.container, CODINGS[entry.container]
        if entry.pixels not in allowed:
            text = f"found {shown(entry.pixels)}; allowed in {container}: {', '.join(allowed)}"
            yield ("pack", index, "pixels"), text
        if entry.compress and container != "ktx2":
            yield ("pack", index, "compress"), f"found {entry.compress}; allowed in ktx2 alone"


def _pack_faults(recipe, wrong, cube_axes):
    """Two packs may not give one file, unless it is the same irradiance."""
    packs = [pack_of(entry, recipe.irradiance.pixels, cube_axes) for entry in recipe.pack]
    first, first_irradiance = {}, {}
    for index, pack in enumerate(packs):
        if _doubtful(wrong, ("pack", index), *STAND_INS, "name", "cube_axes"):
            continue
        other = first.setdefault(pack.name.casefold(), index)
        if other != index:
            yield ("pack", index), f"gives the file {pack.name} as pack[{other}] does; give one a name:"
            continue
        other = first_irradiance.setdefault(pack.irradiance.casefold(), index)
        if pack.cube_axes != packs[other].cube_axes:
            text = f"gives the file {pack.irradiance} as pack[{other}] does, with another cube_axes"
            yield ("pack", index), f"{text}; give one a name:"


def _light_faults(source):
    """A measured illuminance decides the scale by itself; with stops beside it one of the two is meant."""
    text = "found beside horizontal_lux, which decides the scale; remove one of the two"
    if source.horizontal_lux is not None and source.exposure_ev:
        yield ("exposure_ev",), text
        return
    for short, changes in source.each.items() if isinstance(source, GlobSource) else ():
        given = changes.model_fields_set
        stops = (changes if "exposure_ev" in given else source).exposure_ev
        lux = (changes if "horizontal_lux" in given else source).horizontal_lux
        if stops and lux is not None:
            yield ("each", short, "exposure_ev" if "exposure_ev" in given else "horizontal_lux"), text


def _source(entry, path, report):
    if isinstance(entry, dict) and not entry.keys() & {"file", "files"}:
        report(path, "file or files: missing")
        model, key = (GlobSource, "files") if "each" in entry else (FileSource, "file")
        _judged(model, {**entry, key: "any"}, path, report, _mended_source)
        return None
    globbed = isinstance(entry, dict) and "files" in entry
    if globbed and "file" in entry:
        report((*path, "file"), "found beside 'files'; give one of the two")
        entry = {key: value for key, value in entry.items() if key != "file"}
    return _judged(GlobSource if globbed else FileSource, entry, path, report, _mended_source)[0]


def _asked_recipes(entry):
    """(steps, value) of every `recipe` of an entry, which may be wrong in other ways."""
    if not isinstance(entry, dict):
        return
    yield ("recipe",), entry.get("recipe")
    each = entry.get("each")
    for short, changes in each.items() if isinstance(each, dict) else ():
        if isinstance(changes, dict):
            yield ("each", short, "recipe"), changes.get("recipe")
