"""Entries under `sources` -> probes: globs are taken apart, settings laid over each other."""

import functools
import glob
from pathlib import Path, PurePosixPath
from typing import NamedTuple

from .model import Recipe
from .names import clashes, name_fault
from .probes import Pack, Patch, Probe, canonical_json
from .problems import nearest
from .source_model import FacesSource, GlobSource, SourceSettings


class Member(NamedTuple):
    """One file of an entry, and the settings that differ from the entry's."""

    name: str
    file: str
    path: tuple  # the key that asked for it
    changes: SourceSettings | None


def expanded_probes(head, recipes, sources, root, build_dir, report):
    """Probes of all entries, sorted by name; an entry whose recipe is not among `recipes` makes none.

    Parameters: head : PipelineHead; recipes, sources : dicts of valid entries
                root, build_dir : absolute paths
                report : called with (path of keys, sentence) for each mistake
    """
    members = [
        (source, member)
        for entry, source in sources.items()
        for member in _members(entry, source, root, build_dir, report)
    ]
    for index, sentence in clashes([member.name for _, member in members]):
        report(members[index][1].path, sentence)
    recipe_part = functools.cache(lambda name: _recipe_part(head, recipes[name]))
    named = ((source, member, _recipe_name(source, member)) for source, member in members)
    probes = [_probe(*each, recipe_part) for each in named if each[2] in recipes]
    return tuple(sorted(probes, key=lambda probe: probe.name))


def linear_roughness(levels):
    """Roughness k/(n-1) of level k of n (DESIGN of the chain: level 0 is the mirror)."""
    return tuple(level / (levels - 1) if level else 0.0 for level in range(levels))


def linear_sheen_roughness(levels):
    """Roughness (k+1)/n of level k of n: a sheen lobe of roughness 0 reflects nothing."""
    return tuple((level + 1) / levels for level in range(levels))


def _members(entry, source, root, build_dir, report):
    path = ("sources", entry)
    fault = name_fault(entry)
    if fault:
        report(path, fault)
        return []
    if isinstance(source, FacesSource):
        return [Member(entry, PurePosixPath(source.faces.plus_x).as_posix(), path, None)]
    if not isinstance(source, GlobSource):
        return [Member(entry, PurePosixPath(source.file).as_posix(), path, None)]
    files = _matches(source.files, (*path, "files"), root, build_dir, report)
    return _named_files(entry, source, files, report)


def _named_files(entry, source, files, report):
    """Members of a glob entry; `files` maps the path below the fixed part to the file."""
    members, short_names = [], {}
    for below, file in files:
        short = str(below.with_suffix(""))
        other = short_names.setdefault(short, file)
        fault = name_fault(short)
        if other != file:
            fault = f"{other} and {file} give the same name '{entry}/{short}'"
        elif fault:
            fault = f"{file}: {fault}"
        if fault:
            report(("sources", entry, "files"), fault)
            continue
        key = "each" if short in source.each else "files"
        members.append(Member(f"{entry}/{short}", file, ("sources", entry, key), source.each.get(short)))
    for short in source.each if files else ():
        if short not in short_names:
            text = f"names no file of the glob; {nearest(short, short_names)}"
            report(("sources", entry, "each", short), text)
    return members


def _matches(pattern, path, root, build_dir, report):
    """Files of a glob as (path below the fixed part, file as the probe names it), sorted."""
    parts = PurePosixPath(pattern).parts
    fixed = next((i for i, part in enumerate(parts) if glob.has_magic(part)), len(parts) - 1)
    if ".." in parts[fixed:]:
        report(path, "'..' may not follow a wildcard")
        return []
    # glob.glob, not Path.glob: only it takes absolute patterns and leaves '..' before the wildcard alone.
    found = glob.glob(pattern, root_dir=root, recursive=True)  # noqa: PTH207
    files = sorted({PurePosixPath(file) for file in found if _is_source(root / file, build_dir)})
    if not files:
        report(path, f"no file matches {pattern!r} in {root}")
    return [(PurePosixPath(*file.parts[fixed:]), file.as_posix()) for file in files]


def _is_source(file: Path, build_dir):
    """Whether a match is meant: no folder, and nothing that a bake has left."""
    return build_dir not in file.parents and not file.is_dir()


def _recipe_name(source, member):
    return (member.changes and member.changes.recipe) or source.recipe


def _recipe_part(head, recipe: Recipe):
    """The fields of a probe that its recipe decides."""
    specular, irradiance = recipe.specular, recipe.irradiance
    linear = specular.roughness == "linear"
    levels = chain_length(recipe) or 1  # a chain of unknown length has been reported
    return {
        "working": recipe.colour.working,
        "assumed": recipe.colour.assume,
        "sun_action": recipe.sun.action,
        "face_size": 0 if recipe.face_size == "auto" else recipe.face_size,
        "roughness": linear_roughness(levels) if linear else tuple(specular.roughness),
        "tolerance": specular.tolerance,
        "irradiance_face_size": irradiance.face_size,
        "irradiance_sh_order": irradiance.sh_order,
        "packs": tuple(pack_of(entry, irradiance.pixels, head.cube_axes) for entry in recipe.pack),
        **_sheen_part(recipe.sheen),
    }


def _sheen_part(sheen):
    if sheen is None:
        return {}
    linear = sheen.roughness == "linear"
    roughness = linear_sheen_roughness(sheen.levels) if linear else tuple(sheen.roughness)
    return {"sheen_face_size": sheen.face_size, "sheen_roughness": roughness}


def chain_length(recipe: Recipe):
    """Number of levels of a recipe's chain; None for a full one of faces whose size isn't known yet."""
    levels, size = recipe.specular.levels, recipe.face_size
    if levels != "full":
        return levels
    return None if size == "auto" else size.bit_length()


def pack_of(entry, irradiance_pixels, cube_axes):
    """The Pack of an entry: its own name stands in the names of files where the pixel coding would."""
    own = entry.pixels if entry.container == "exr" else irradiance_pixels
    called = f"{entry.name or entry.pixels}.{entry.container}"
    return Pack(
        name=f"specular.{called}",
        container=entry.container,
        pixels=entry.pixels,
        cube_axes=entry.cube_axes or cube_axes,
        compress=entry.compress or 0,
        irradiance=f"irradiance.{entry.name or own}.{entry.container}",
        irradiance_pixels=own,
        sheen=f"sheen.{called}",
    )


def _probe(source, member, recipe, recipe_part):
    settings = {name: getattr(source, name) for name in SourceSettings.model_fields}
    if member.changes:
        changed = member.changes.model_fields_set & settings.keys()
        settings |= {name: getattr(member.changes, name) for name in changed}
        settings["extra"] = {**source.extra, **member.changes.extra}
    settings["extra"] = canonical_json(settings["extra"])
    if settings["patch"]:
        patch = settings["patch"].model_dump()
        settings["patch"] = Patch(**{**patch, "direction": tuple(patch["direction"])})
    faces = source.faces.files() if isinstance(source, FacesSource) else ()
    faces = tuple(PurePosixPath(file).as_posix() for file in faces)
    return Probe(
        name=member.name, file=member.file, faces=faces, recipe=recipe, **settings, **recipe_part(recipe)
    )
