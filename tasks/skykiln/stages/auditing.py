"""The audit of a probe's packed files: which cube maps are held against what.

Of the specular chain, of the irradiance cube and of a sheen chain, the file with the finest coding is
held against the panorama, at drawn texels (`light/audit`). All others must agree with it but for their
rounding, at every texel (`light/agreement`), so that they need no draws of their own. BC6H has no bound of
rounding that an audit could allow for: where nothing finer is packed, the levels as they were encoded are
audited in its place, and the file must agree with these.
"""

import math
from typing import NamedTuple

import numpy as np

from ..formats.coding_steps import FINEST_FIRST, largest_rounding
from ..formats.texture_files import read_texture
from ..light.agreement import agreement
from ..light.audit import PER_FACE, Chart, judge, look, together
from ..light.cube_axes import from_cube_space, images_of, to_cube_space
from ..light.directions import alpha_from_roughness
from .audit_record import UNCODED, audit_record
from .pack_probe import packed_names
from .packing import darkened


class Cube(NamedTuple):
    """A packed file, read back.

    levels : the images of each, (6, n, n, 3) float32, as stored
    roundings : what its coding may have moved each value by
    """

    file: str
    pixels: str
    cube_axes: str
    levels: tuple
    roundings: tuple


class ProbeAudit:
    """The audit of one probe.

    probe : Probe; panorama : what it was made from; files : name of each packed file -> its bytes
    stops : its storage_ev; encoded : kind of chain -> its filtered levels, where no packed file's rounding
    is known
    """

    def __init__(self, probe, panorama, files, stops, encoded):
        self.probe, self.panorama, self._unit = probe, panorama, 2.0**stops
        cubes = [_cube(name, files[name], axes) for name, axes in _axes_of_files(probe).items()]
        self._chains = {kind: _finest_first(cubes, kind) for kind in ("specular", "irradiance", "sheen")}
        for kind, filtered in encoded.items():
            levels = tuple(darkened(level, stops) for level in filtered)
            uncoded = Cube(UNCODED, "float", "direct", levels, _roundings("float", levels))
            self._chains[kind].insert(0, uncoded)
        self.charts = [*self._specular_charts(), self._irradiance_chart(), *self._sheen_charts()]

    def look(self, seed, per_face=PER_FACE):
        """Findings at texels that follow from the seed."""
        return look(self.panorama, self.charts, seed, math.radians(self.probe.yaw_deg), per_face)

    def record(self, looks) -> dict:
        """The verdict on some looks, as probe.json tells it."""
        chains = [(chain[0].file, _agreements(chain)) for chain in self._chains.values() if chain]
        return audit_record(self.charts, judge(self.charts, together(looks)), chains)

    def _specular_charts(self):
        for level, roughness in enumerate(self.probe.roughness):
            yield self._chart(f"level {level}", "specular", level, roughness)

    def _irradiance_chart(self):
        return self._chart("irradiance", "irradiance", 0, 1.0)._replace(unit=self._unit / math.pi)

    def _sheen_charts(self):
        for level, roughness in enumerate(self.probe.sheen_roughness):
            yield self._chart(f"sheen level {level}", "sheen", level, roughness)._replace(lobe="sheen")

    def _chart(self, name, kind, level, roughness):
        """A level of the finest cube of a kind, in world axes."""
        cube, alpha = self._chains[kind][0], alpha_from_roughness(roughness)
        images, rounding = (images_of(each[level], cube.cube_axes) for each in (cube.levels, cube.roundings))
        return Chart(name, images, alpha, self.probe.tolerance, rounding=rounding, unit=self._unit)


def _axes_of_files(probe):
    """Name of each packed file -> its cube_axes."""
    entries = {pack.name: pack for pack in probe.packs}
    named = packed_names(probe).items()
    return {name: entries[pack].cube_axes for pack, names in named for name in names}


def _cube(name, data, cube_axes):
    texture = read_texture(data, name)
    return Cube(name, texture.pixels, cube_axes, texture.levels, _roundings(texture.pixels, texture.levels))


def _roundings(pixels, levels):
    return tuple(largest_rounding(pixels, level) for level in levels)


def _finest_first(cubes, kind):
    chosen = [cube for cube in cubes if cube.file.startswith(f"{kind}.")]
    return sorted(chosen, key=lambda cube: (FINEST_FIRST.index(cube.pixels), cube.file))


def _agreements(chain):
    """(file, share used, share of texels) of all cubes but the first, beside the first."""
    first, *others = chain
    for other in others:
        levels, roundings = _with_axes_of(other, first)
        pairs = zip(levels, other.levels, roundings, other.roundings, strict=True)
        found = [agreement(a, b, p + q) for a, b, p, q in pairs]
        texels = [level[..., 0].size for level in other.levels]
        share = np.average([level.share for level in found], weights=texels)
        yield other.file, max(level.used for level in found), float(share)


def _with_axes_of(other, cube):
    """Levels and roundings of a cube as the images of another file."""
    if other.cube_axes == cube.cube_axes:
        return cube.levels, cube.roundings
    for_other = (
        [to_cube_space(from_cube_space(image, cube.cube_axes), other.cube_axes) for image in images]
        for images in (cube.levels, cube.roundings)
    )
    return tuple(for_other)
