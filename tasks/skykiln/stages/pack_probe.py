"""PackProbe: the specular chain and the irradiance cube in one container and coding."""

import luigi

from .decode_source import DecodeSource
from .extract_faces import ExtractFaces
from .filter_level import FilterLevel
from .gather_irradiance import GatherIrradiance
from .probe_stage import ProbeStage


class PackProbe(ProbeStage):
    """The files of one entry of the recipe's `pack`, and facts about them.

    Outputs go by the names of the files. Packs that share an irradiance file leave it to the first of
    them by name.
    """

    version = 4
    pack = luigi.Parameter()

    @property
    def title(self):
        return f"pack {self.pack}"

    def requires(self):
        levels = range(1, len(self.probe.roughness))
        return {
            "light": self.of_same(DecodeSource),
            "faces": self.of_same(ExtractFaces),
            **{f"level_{level}": self.of_same(FilterLevel, level=level) for level in levels},
            "irradiance": self.of_same(GatherIrradiance),
        }

    def files(self):
        names = packed_names(self.probe)[self.pack]
        return {name: self.work_file(f"packed/{name}") for name in (*names, f"{self.pack}.json")}

    def settings(self):
        entry, probe = self._entry(), self.probe
        return {
            "name": probe.name,
            "container": entry.container,
            "pixels": entry.pixels,
            "irradiance_pixels": entry.irradiance_pixels,
            "compress": entry.compress,
            "cube_axes": entry.cube_axes,
            "roughness": list(probe.roughness),
            "primaries": probe.working,
        }

    def make(self, inputs):
        from .packing import share_lost, shared_storage_ev

        units = inputs["light"].json()["units"]
        *chain, cube = [source.array() for role, source in inputs.items() if role != "light"]
        stops = shared_storage_ev([*chain, cube])
        names = packed_names(self.probe)[self.pack]
        packed = {name: self._packed(name, chain, cube, stops, units) for name in names}
        facts = {
            "storage_ev": stops,
            "face_sizes": [level.shape[1] for level in chain],
            "irradiance_face_size": cube.shape[1],
            "lost_to_clamping": share_lost(chain[0], stops),
            "files": {name: facts for name, (_, facts) in packed.items()},
        }
        return {**{name: data for name, (data, _) in packed.items()}, f"{self.pack}.json": facts}

    def _packed(self, name, chain, cube, stops, units):
        """(bytes, facts) of one file."""
        from .packing import pack_images, packed_facts, stored_images

        entry, content = self._entry(), name.partition(".")[0]
        levels, pixels, compress = {
            "specular": (chain, entry.pixels, entry.compress),
            "irradiance": ([cube], entry.irradiance_pixels, 0),
        }[content]
        images = stored_images(levels, entry.cube_axes, stops)
        # Not the release: files would change with every one of them.
        writer = f"skykiln PackProbe {self.version}"
        about = self._about(content, stops, units)
        primaries = self.probe.working
        data = pack_images(images, entry.container, pixels, compress, about, writer, primaries)
        return data, packed_facts(data, name, images)

    def _about(self, content, stops, units):
        """What a loader must know of a file, for the file itself to tell."""
        told = ("name", "cube_axes", "primaries") + (("roughness",) if content == "specular" else ())
        settings = self.settings()
        return {
            "content": content,
            "storage_ev": stops,
            "units": units,
            **{key: settings[key] for key in told},
        }

    def _entry(self):
        return next(entry for entry in self.probe.packs if entry.name == self.pack)


def packed_names(probe) -> dict:
    """Names of the files of each pack: name of the pack -> (specular[, irradiance])."""
    names, taken = {}, set()
    for entry in sorted(probe.packs, key=lambda entry: entry.name):
        names[entry.name] = (entry.name,) if entry.irradiance in taken else (entry.name, entry.irradiance)
        taken.add(entry.irradiance)
    return names
