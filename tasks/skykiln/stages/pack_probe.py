"""PackProbe: the specular chain and the irradiance cube in one container and coding."""

import luigi

from .extract_faces import ExtractFaces
from .filter_level import FilterLevel
from .gather_irradiance import GatherIrradiance
from .probe_stage import ProbeStage


class PackProbe(ProbeStage):
    """The files of one entry of the recipe's `pack`, and facts about them.

    Outputs go by the names of the files. Packs that would give the same irradiance file leave it to
    the first of them by name.
    """

    version = 1
    pack = luigi.Parameter()

    @property
    def title(self):
        return f"pack {self.pack}"

    def requires(self):
        levels = range(1, len(self.probe.roughness))
        return {
            "faces": self.of_same(ExtractFaces),
            **{f"level_{level}": self.of_same(FilterLevel, level=level) for level in levels},
            "irradiance": self.of_same(GatherIrradiance),
        }

    def files(self):
        names = packed_names(self.probe)[self.pack]
        return {name: self.work_file(f"packed/{name}") for name in (*names, f"{self.pack}.json")}

    def settings(self):
        entry = self._entry()
        return {
            "container": entry.container,
            "pixels": entry.pixels,
            "cube_axes": entry.cube_axes,
            "irradiance_pixels": self.probe.irradiance_pixels,
        }

    def make(self, inputs):
        from .packing import pack_faces, share_lost, shared_storage_ev

        *chain, cube = [source.array() for source in inputs.values()]
        stops = shared_storage_ev([*chain, cube])
        entry = self._entry()
        # Not the release: files would change with every one of them.
        shared = entry.cube_axes, stops, f"skykiln PackProbe {self.version}"
        specular, *irradiance = packed_names(self.probe)[self.pack]
        contents = {specular: pack_faces(chain, entry.pixels, *shared)}
        for name in irradiance:
            contents[name] = pack_faces([cube], self.probe.irradiance_pixels, *shared)
        facts = {
            "storage_ev": stops,
            "face_sizes": [level.shape[1] for level in chain],
            "irradiance_face_size": cube.shape[1],
            "lost_to_clamping": share_lost(chain[0], stops),
        }
        return {**contents, f"{self.pack}.json": facts}

    def _entry(self):
        return next(entry for entry in self.probe.packs if entry.name == self.pack)


def packed_names(probe) -> dict:
    """Names of the files of each pack: name of the pack -> (specular[, irradiance])."""
    names, taken = {}, set()
    for entry in sorted(probe.packs, key=lambda entry: entry.name):
        irradiance = _irradiance_name(entry, probe.irradiance_pixels)
        names[entry.name] = (entry.name,) if irradiance in taken else (entry.name, irradiance)
        taken.add(irradiance)
    return names


def _irradiance_name(entry, pixels):
    """As the pack names itself, or after the irradiance's own pixel coding."""
    if entry.name == f"specular.{entry.pixels}.{entry.container}":
        return f"irradiance.{pixels}.{entry.container}"
    return entry.name.replace("specular.", "irradiance.", 1)
