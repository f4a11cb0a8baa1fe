"""Entries under `recipes`: each judged by itself, then what its keys say together."""

import itertools

from .expand import chain_length, pack_of
from .judging import doubtful, judged
from .model import CODINGS, SHEEN_FROM, Recipe
from .problems import shown

# What stands in for a value that was told to be wrong, where the entry can't be judged without one.
STAND_INS = {"container": "ktx2", "pixels": "rgba16f"}


def valid_recipes(entries, cube_axes, report):
    """Recipe objects by name; `report(path, text)` is called for each mistake.

    Parameters: cube_axes : those at the top of the file
    """
    recipes = {}
    for name, entry in entries.items():
        path = ("recipes", name)
        recipe, wrong = judged(Recipe, entry, path, report, _mended_recipe)
        if recipe is not None:
            recipes[name] = recipe
            for steps, text in _recipe_faults(recipe, wrong, cube_axes):
                report((*path, *steps), text)
    return recipes


def _mended_recipe(entry):
    if "pack" not in entry:
        return entry
    packs = [{**STAND_INS, **(item if isinstance(item, dict) else {})} for item in entry["pack"]]
    return {**entry, "pack": packs}


def _recipe_faults(recipe, wrong, cube_axes):
    sized = not doubtful(wrong, (), "face_size")
    counted = not doubtful(wrong, ("specular",), "levels")
    if not doubtful(wrong, ("specular",), "roughness"):
        known = counted and (sized or recipe.specular.levels != "full")
        yield from _roughness_faults(recipe.specular.roughness, chain_length(recipe) if known else None)
    if counted and sized:
        yield from _level_faults(recipe)
    if recipe.sheen is not None and not doubtful(wrong, (), "sheen"):
        yield from _sheen_faults(recipe.sheen, wrong)
    if not doubtful(wrong, (), "pack"):
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


def _sheen_faults(sheen, wrong):
    counted = not doubtful(wrong, ("sheen",), "levels")
    if counted and not doubtful(wrong, ("sheen",), "face_size"):
        most = sheen.face_size.bit_length()
        if sheen.levels > most:
            text = f"a face of {sheen.face_size} texels has at most {most} levels, down to 1 texel"
            yield ("sheen", "levels"), f"found {sheen.levels}; {text}"
    numbers, steps = sheen.roughness, ("sheen", "roughness")
    if numbers == "linear" or doubtful(wrong, ("sheen",), "roughness"):
        return
    if counted and len(numbers) != sheen.levels:
        yield steps, f"found {len(numbers)} numbers; allowed: one per level, {sheen.levels}"
    rising = all(low < high for low, high in itertools.pairwise(numbers))
    if not (numbers[0] >= SHEEN_FROM and rising and numbers[-1] <= 1):
        found = ", ".join(f"{number:g}" for number in numbers)
        yield steps, f"found {found}; allowed: numbers that rise from at least {SHEEN_FROM} to at most 1"


def _coding_faults(entries, wrong):
    for index, entry in enumerate(entries):
        if doubtful(wrong, ("pack", index), *STAND_INS):
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
        if doubtful(wrong, ("pack", index), *STAND_INS, "name", "cube_axes"):
            continue
        other = first.setdefault(pack.name.casefold(), index)
        if other != index:
            yield ("pack", index), f"gives the file {pack.name} as pack[{other}] does; give one a name:"
            continue
        other = first_irradiance.setdefault(pack.irradiance.casefold(), index)
        if pack.cube_axes != packs[other].cube_axes:
            text = f"gives the file {pack.irradiance} as pack[{other}] does, with another cube_axes"
            yield ("pack", index), f"{text}; give one a name:"
