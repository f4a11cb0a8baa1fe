"""The audit of a probe's packed files: which cube maps are held against what.

Of the specular chain, and of the irradiance cube, the file with the finest coding is held against the
panorama, at drawn texels (`light/audit`). All others must agree with it but for their rounding, at every
texel (`light/agreement`), so that they need no draws of their own. BC6H has no bound of rounding that
an audit could allow for: where nothing finer is packed, the levels as they were encoded are audited in
its place, and the file must agree with these.
"""

import math
from typing import NamedTuple

import numpy as np

from ..formats.coding_steps import FINEST_FIRST, largest_rounding
from ..formats.texture_files import read_texture
from ..light.agreement import agreement
from ..light.audit import PER_FACE, Chart, judge, look, together
from ..light.cube_axes import from_cube_space
from ..light.directions import alpha_from_roughness
from .audit_record import UNCODED, audit_record
from .pack_probe import packed_names


class Cube(NamedTuple):
    """A packed file, read back.

    levels : (6, n, n, 3) float32 each, world axes, radiance; of irradiance over pi
    roundings : what its coding may have moved each value by
    """

    file: str
    pixels: str
    levels: list
    roundings: list


class ProbeAudit:
    """The audit of one probe.

    probe : Probe; panorama : what it was made from; files : name of each packed file -> its bytes
    stops : its storage_ev; encoded : the filtered levels, where no packed file's rounding is known
    """

    def __init__(self, probe, panorama, files, stops, encoded=()):
        self.probe, self.panorama = probe, panorama
        cubes = [_cube(name, files[name], axes, stops) for name, axes in _axes_of_files(probe).items()]
        self._specular, self._irradiance = (_finest_first(cubes, kind) for kind in ("specular", "irradiance"))
        if encoded:
            self._specular.insert(0, Cube(UNCODED, "float", encoded, [np.float32(0)] * len(encoded)))
        self.charts = [*self._specular_charts(), *self._irradiance_charts()]

    def look(self, seed, per_face=PER_FACE):
        """Findings at texels that follow from the seed."""
        return look(self.panorama, self.charts, seed, math.radians(self.probe.yaw_deg), per_face)

    def record(self, looks) -> dict:
        """The verdict on some looks, as probe.json tells it."""
        chains = [(chain[0].file, _agreements(chain)) for chain in (self._specular, self._irradiance)]
        return audit_record(self.charts, judge(self.charts, together(looks)), chains)

    def _specular_charts(self):
        finest, tolerance = self._specular[0], self.probe.tolerance
        rows = zip(finest.levels, finest.roundings, self.probe.roughness, strict=True)
        return [
            Chart(f"level {k}", level, alpha_from_roughness(roughness), tolerance, rounding=rounding)
            for k, (level, rounding, roughness) in enumerate(rows)
        ]

    def _irradiance_charts(self):
        finest = self._irradiance[0]
        (level,), (rounding,) = finest.levels, finest.roundings
        return [Chart("irradiance", level, 1.0, self.probe.tolerance, rounding=rounding)]


def _axes_of_files(probe):
    """Name of each packed file -> its cube_axes."""
    entries = {pack.name: pack for pack in probe.packs}
    named = packed_names(probe).items()
    return {name: entries[pack].cube_axes for pack, names in named for name in names}


def _cube(name, data, cube_axes, stops):
    texture = read_texture(data, name)
    factor = np.float32(2.0**stops / (math.pi if name.startswith("irradiance.") else 1.0))
    levels = [from_cube_space(level, cube_axes) * factor for level in texture.levels]
    roundings = [largest_rounding(texture.pixels, level) for level in texture.levels]
    roundings = [from_cube_space(rounding, cube_axes) * factor for rounding in roundings]
    return Cube(name, texture.pixels, levels, roundings)


def _finest_first(cubes, kind):
    chosen = [cube for cube in cubes if cube.file.startswith(f"{kind}.")]
    return sorted(chosen, key=lambda cube: (FINEST_FIRST.index(cube.pixels), cube.file))


def _agreements(chain):
    """(file, share used, share of texels) of all cubes but the first, beside the first."""
    finest, *others = chain
    for other in others:
        pairs = zip(finest.levels, other.levels, finest.roundings, other.roundings, strict=True)
        found = [agreement(a, b, np.broadcast_to(p + q, b.shape)) for a, b, p, q in pairs]
        texels = [level[..., 0].size for level in other.levels]
        share = np.average([level.share for level in found], weights=texels)
        yield other.file, max(level.used for level in found), float(share)
