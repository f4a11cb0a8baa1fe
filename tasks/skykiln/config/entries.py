"""Entries under `recipes` and `sources`: each judged by itself, then what its keys say together.

A wrong key is reported and the rest of its entry judged on without it, so that all mistakes show at once.
"""

import itertools

from .expand import pack_name
from .model import FileSource, GlobSource, Recipe
from .problems import nearest, shown, validated


def valid_recipes(entries, report):
    """Recipe objects by name; `report(path, text)` is called for each mistake."""
    recipes = {}
    for name, entry in entries.items():
        path = ("recipes", name)
        recipe, wrong = _judged(Recipe, entry, path, report)
        if recipe is not None:
            recipes[name] = recipe
            for steps, text in _recipe_faults(recipe, wrong):
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


def _recipe_faults(recipe, wrong):
    if "specular" not in wrong:
        yield from _roughness_faults(recipe.specular)
    if not wrong & {"specular", "face_size"}:
        yield from _level_faults(recipe)
    if "pack" not in wrong:
        yield from _pack_faults(recipe.pack)


def _level_faults(recipe):
    levels, size = recipe.specular.levels, recipe.face_size
    if size != "auto" and levels > size.bit_length():
        most = f"a face of {size} texels has at most {size.bit_length()} levels, down to 1 texel"
        yield ("specular", "levels"), f"found {levels}; {most}"


def _roughness_faults(specular):
    steps, numbers = ("specular", "roughness"), specular.roughness
    if numbers == "linear":
        return
    if len(numbers) != specular.levels:
        yield steps, f"found {len(numbers)} numbers; allowed: one per level, {specular.levels}"
    rising = all(low < high for low, high in itertools.pairwise(numbers))
    if not (numbers[0] == 0 and rising and numbers[-1] <= 1):
        found = ", ".join(f"{number:g}" for number in numbers)
        yield steps, f"found {found}; allowed: numbers that start with 0 and rise to at most 1"


def _pack_faults(entries):
    first = {}
    for index, entry in enumerate(entries):
        name = pack_name(entry)
        other = first.setdefault(name.casefold(), index)
        if other != index:
            yield ("pack", index), f"gives the file {name} as pack[{other}] does; give one a name:"


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
