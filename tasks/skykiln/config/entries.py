"""Entries under `recipes` and `sources`: each judged by itself, then what its keys say together.

A wrong key is reported and the rest of its entry judged on without it, so that all mistakes show at once.
"""

import itertools

from .expand import chain_length, pack_of
from .model import CODINGS, FileSource, GlobSource, Recipe
from .problems import nearest, shown, validated


def valid_recipes(entries, cube_axes, report):
    """Recipe objects by name; `report(path, text)` is called for each mistake.

    Parameters: cube_axes : those at the top of the file
    """
    recipes = {}
    for name, entry in entries.items():
        path = ("recipes", name)
        recipe, wrong = _judged(Recipe, entry, path, report)
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
        for steps, recipe in _asked_recipes(entry):
            if isinstance(recipe, str) and recipe not in recipe_names:
                text = f"no recipe is called {shown(recipe)}; {nearest(recipe, recipe_names)}"
                report((*path, *steps), text)
    return sources


def _judged(model, entry, path, report):
    """(object, keys that were wrong); the object is what the other keys make, None if they make none."""
    wrong = set()

    def note(steps, text):
        report(steps, text)
        wrong.update(steps[len(path) : len(path) + 1])

    judged = validated(model, entry, path, note)
    if judged is None and isinstance(entry, dict):
        rest = {key: value for key, value in entry.items() if key not in wrong}
        judged = validated(model, rest, path, lambda steps, text: None)
    return judged, wrong


def _recipe_faults(recipe, wrong, cube_axes):
    if "specular" not in wrong:
        levels = None if "face_size" in wrong else chain_length(recipe)
        yield from _roughness_faults(recipe.specular.roughness, levels)
    if not wrong & {"specular", "face_size"}:
        yield from _level_faults(recipe)
    if "pack" not in wrong:
        yield from _coding_faults(recipe.pack)
        yield from _pack_faults(recipe, cube_axes)


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


def _coding_faults(entries):
    for index, entry in enumerate(entries):
        container, allowed = entry.container, CODINGS[entry.container]
        if entry.pixels not in allowed:
            text = f"found {shown(entry.pixels)}; allowed in {container}: {', '.join(allowed)}"
            yield ("pack", index, "pixels"), text
        if entry.compress and container != "ktx2":
            yield ("pack", index, "compress"), f"found {entry.compress}; allowed in ktx2 alone"


def _pack_faults(recipe, cube_axes):
    """Two packs may not give one file, unless it is the same irradiance."""
    packs = [pack_of(entry, recipe.irradiance.pixels, cube_axes) for entry in recipe.pack]
    first, first_irradiance = {}, {}
    for index, pack in enumerate(packs):
        other = first.setdefault(pack.name.casefold(), index)
        if other != index:
            yield ("pack", index), f"gives the file {pack.name} as pack[{other}] does; give one a name:"
            continue
        other = first_irradiance.setdefault(pack.irradiance.casefold(), index)
        if pack.cube_axes != packs[other].cube_axes:
            text = f"gives the file {pack.irradiance} as pack[{other}] does, with another cube_axes"
            yield ("pack", index), f"{text}; give one a name:"


def _source(entry, path, report):
    globbed = isinstance(entry, dict) and "files" in entry
    if globbed and "file" in entry:
        report((*path, "file"), "found beside 'files'; give one of the two")
        entry = {key: value for key, value in entry.items() if key != "file"}
    return _judged(GlobSource if globbed else FileSource, entry, path, report)[0]


def _asked_recipes(entry):
    """(steps, value) of every `recipe` of an entry, which may be wrong in other ways."""
    if not isinstance(entry, dict):
        return
    yield ("recipe",), entry.get("recipe")
    each = entry.get("each")
    for short, changes in each.items() if isinstance(each, dict) else ():
        if isinstance(changes, dict):
            yield ("each", short, "recipe"), changes.get("recipe")
