"""FilterLevel: one mip level of the specular chain."""

import luigi

from ..errors import FileError
from .extract_faces import ExtractFaces
from .probe_stage import ProbeStage
from .pyramids import pyramid_of


class FilterLevel(ProbeStage):
    """(6, n >> level, n >> level, 3) float32, the faces filtered by the GGX lobe of the level's roughness."""

    version = 1
    level = luigi.IntParameter()

    @property
    def title(self):
        return f"specular level {self.level}"

    def requires(self):
        return {"faces": self.of_same(ExtractFaces)}

    def files(self):
        return {"level": self.work_file(f"level_{self.level}.npy")}

    def settings(self):
        return {"roughness": self.probe.roughness[self.level], "tolerance": self.probe.tolerance}

    def make(self, inputs):
        from ..light.directions import alpha_from_roughness
        from ..light.specular import filter_level

        size = self._face_size(inputs["faces"].array().shape[1])
        alpha = alpha_from_roughness(self.probe.roughness[self.level])
        return {"level": filter_level(pyramid_of(inputs["faces"]), size, alpha, self.probe.tolerance)}

    def _face_size(self, largest):
        if largest >> self.level == 0:
            levels, most = len(self.probe.roughness), largest.bit_length()
            raise FileError(
                f"{self.pinned.source_path}: recipe '{self.probe.recipe}' asks for {levels} levels, "
                f"but a face of {largest} texels has {most}; lower specular.levels or set face_size"
            )
        return largest >> self.level
