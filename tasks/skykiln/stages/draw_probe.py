"""DrawProbe: what people see of a probe, and the small copy of its chain that tells what changed."""

import math
from pathlib import Path

from .extract_faces import auto_face_size
from .filter_level import specular_chain
from .gather_irradiance import GatherIrradiance
from .pack_probe import PackProbe, packed_names
from .probe_stage import ProbeStage
from .sky_panorama import sky_of

SKY_FACE_SIZE = 128  # a probe with larger faces is seen in mirrors, or as a background
SKY_PICTURES = ("panorama", "luminance", "levels", "scene")


class DrawProbe(ProbeStage):
    """`thumbnails`: at most 32^2 texels of every level. `looks`: numbers about the pictures.
    `small`: one picture. For a sky also those of SKY_PICTURES; the scene is lit by the first pack."""

    version = 3
    title = "pictures"

    def requires(self):
        packed = self.of_same(PackProbe, pack=self._pack)
        seen = {
            "pixels": sky_of(self),
            "irradiance": self.of_same(GatherIrradiance),
            **dict.fromkeys(packed.files(), packed),
        }
        return {**specular_chain(self), **(seen if is_sky(self.pinned) else {})}

    def files(self):
        pictures = ("small", *SKY_PICTURES) if is_sky(self.pinned) else ("small",)
        return {
            "thumbnails": self.work_file("thumbnails.npy"),
            "looks": self.work_file("looks.json"),
            **{name: f"{self.pinned.pictures}/{name}.png" for name in pictures},
        }

    def superseded(self):
        """Pictures of a sky that is none any more."""
        lost = [name for name in SKY_PICTURES if name not in self.files()]
        return [path for name in lost if (path := Path(self.pinned.pictures, f"{name}.png")).exists()]

    def settings(self):
        probe = self.probe
        told = {"working": probe.working}
        if not is_sky(self.pinned):
            return told
        seen = {"yaw_deg": probe.yaw_deg, "roughness": list(probe.roughness), "cube_axes": self._axes}
        return {**told, **seen}

    def make(self, inputs):
        from .drawing import light_of, looks_of, sky_files, small_files

        probe = self.probe
        levels = [inputs[role].array() for role in specular_chain(self)]
        made, looks = small_files(levels), looks_of(levels, probe.working)
        if not is_sky(self.pinned):
            return {**made, "looks": looks}
        specular, irradiance, *_ = packed_names(probe)[self._pack]
        files = [inputs[name].bytes() for name in (specular, irradiance)]
        stops = inputs[f"{self._pack}.json"].json()["storage_ev"]
        light = light_of(*files, self._axes, probe.roughness, stops)
        panorama, cube = inputs["pixels"].array(), inputs["irradiance"].array()
        yaw = math.radians(probe.yaw_deg)
        pictures, more = sky_files(panorama, yaw, levels, cube, light, probe.working)
        return {**made, **pictures, "looks": {**looks, **more}}

    @property
    def _pack(self):
        return next(iter(packed_names(self.probe)))

    @property
    def _axes(self):
        return next(pack.cube_axes for pack in self.probe.packs if pack.name == self._pack)


def is_sky(pinned) -> bool:
    """Whether a probe is large enough to be looked at closely. Told from the recipe, and with
    `face_size: auto` from the source's bytes: about 1.5 a pixel."""
    width = int(math.sqrt(2 * pinned.source_bytes / 1.5))
    return (pinned.probe.face_size or auto_face_size(width)) >= SKY_FACE_SIZE
