"""PackProbe: the specular chain, the irradiance cube and a sheen chain in one container and coding."""

import luigi

from .decode_source import DecodeSource
from .filter_level import specular_chain
from .filter_sheen import sheen_chain
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
        chains = self._chains()
        return {
            "light": self.of_same(DecodeSource),
            **chains["specular"],
            **chains["irradiance"],
            **chains["sheen"],
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
            "sheen_roughness": list(probe.sheen_roughness),
        }

    def make(self, inputs):
        from .packing import share_lost, shared_storage_ev

        units = inputs["light"].json()["units"]
        cubes = {
            content: [inputs[role].array() for role in chain] for content, chain in self._chains().items()
        }
        stops = shared_storage_ev([cube for content in cubes.values() for cube in content])
        names = packed_names(self.probe)[self.pack]
        packed = {name: self._packed(name, cubes, stops, units) for name in names}
        facts = {
            "storage_ev": stops,
            "face_sizes": [level.shape[1] for level in cubes["specular"]],
            "irradiance_face_size": cubes["irradiance"][0].shape[1],
            "lost_to_clamping": share_lost(cubes["specular"][0], stops),
            "files": {name: facts for name, (_, facts) in packed.items()},
        }
        return {**{name: data for name, (data, _) in packed.items()}, f"{self.pack}.json": facts}

    def _chains(self):
        """Content of a file -> the stages of its levels by role, the largest first."""
        return {
            "specular": specular_chain(self),
            "irradiance": {"irradiance": self.of_same(GatherIrradiance)},
            "sheen": sheen_chain(self),
        }

    def _packed(self, name, cubes, stops, units):
        """(bytes, facts) of one file."""
        from .packing import pack_images, packed_facts, stored_images

        entry, content = self._entry(), name.partition(".")[0]
        pixels, compress = entry.pixels, entry.compress
        if content == "irradiance":
            pixels, compress = entry.irradiance_pixels, 0
        images = stored_images(cubes[content], entry.cube_axes, stops)
        # Not the release: files would change with every one of them.
        writer = f"skykiln PackProbe {self.version}"
        about = self._about(content, stops, units)
        primaries = self.probe.working
        data = pack_images(images, entry.container, pixels, compress, about, writer, primaries)
        return data, packed_facts(data, name, images)

    def _about(self, content, stops, units):
        """What a loader must know of a file, for the file itself to tell."""
        settings = self.settings()
        chains = {"specular": settings["roughness"], "sheen": settings["sheen_roughness"]}
        return {
            "content": content,
            "storage_ev": stops,
            "units": units,
            **{key: settings[key] for key in ("name", "cube_axes", "primaries")},
            **({"roughness": chains[content]} if content in chains else {}),
        }

    def _entry(self):
        return next(entry for entry in self.probe.packs if entry.name == self.pack)


def packed_names(probe) -> dict:
    """Names of the files of each pack: name of the pack -> (specular[, irradiance][, sheen])."""
    names, taken = {}, set()
    for entry in sorted(probe.packs, key=lambda entry: entry.name):
        irradiance = () if entry.irradiance in taken else (entry.irradiance,)
        sheen = (entry.sheen,) if probe.sheen_roughness else ()
        names[entry.name] = (entry.name, *irradiance, *sheen)
        taken.add(entry.irradiance)
    return names
