"""FilterLevel: one mip level of the specular chain."""

import luigi

from ..errors import FileError
from .extract_faces import ExtractFaces, face_size_of
from .probe_stage import ProbeStage
from .pyramids import pyramid_of
from .sky_panorama import sky_of


class FilterLevel(ProbeStage):
    """(6, n >> level, n >> level, 3) float32, the sky filtered by the GGX lobe of the level's roughness.

    From the panorama, not the faces: what it resolves more finely than a texel counts too.
    """

    version = 6
    level = luigi.IntParameter()

    @property
    def title(self):
        return f"specular level {self.level}"

    def requires(self):
        return {"pixels": sky_of(self)}

    def files(self):
        return {"level": self.work_file(f"level_{self.level}.npy")}

    def settings(self):
        probe = self.probe
        return {
            "face_size": probe.face_size or "auto",
            "roughness": probe.roughness[self.level],
            "tolerance": probe.tolerance,
            "yaw_deg": probe.yaw_deg,
        }

    def make(self, inputs):
        from ..light.directions import alpha_from_roughness
        from ..light.specular import filter_level

        probe, pixels = self.probe, inputs["pixels"]
        size = self._face_size(face_size_of(probe, pixels.array()))
        alpha = alpha_from_roughness(probe.roughness[self.level])
        return {"level": filter_level(pyramid_of(pixels, probe.yaw_deg), size, alpha, probe.tolerance)}

    def _face_size(self, largest):
        if largest >> self.level == 0:
            levels, most = len(self.probe.roughness), largest.bit_length()
            raise FileError(
                f"{self.pinned.source_path}: recipe '{self.probe.recipe}' asks for {levels} levels, "
                f"but a face of {largest} texels has {most}; lower specular.levels or set face_size"
            )
        return largest >> self.level


def specular_chain(stage) -> dict:
    """The stages of all levels of the probe of a stage, by role, the largest first."""
    levels = range(1, len(stage.probe.roughness))
    filtered = {f"level_{level}": stage.of_same(FilterLevel, level=level) for level in levels}
    return {"faces": stage.of_same(ExtractFaces), **filtered}
