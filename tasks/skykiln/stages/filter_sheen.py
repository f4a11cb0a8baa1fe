"""FilterSheen: one mip level of the sheen chain, where a recipe asks for one."""

import luigi

from .probe_stage import ProbeStage
from .pyramids import pyramid_of
from .sky_panorama import sky_of


class FilterSheen(ProbeStage):
    """(6, n >> level, n >> level, 3) float32, the sky filtered by the sheen lobe of the level's roughness."""

    version = 1
    level = luigi.IntParameter()

    @property
    def title(self):
        return f"sheen level {self.level}"

    def requires(self):
        return {"pixels": sky_of(self)}

    def files(self):
        return {"level": self.work_file(f"sheen_{self.level}.npy")}

    def settings(self):
        probe = self.probe
        return {
            "face_size": probe.sheen_face_size >> self.level,
            "roughness": probe.sheen_roughness[self.level],
            "tolerance": probe.tolerance,
            "yaw_deg": probe.yaw_deg,
        }

    def make(self, inputs):
        from ..light.directions import alpha_from_roughness
        from ..light.sheen import sheen_lobe
        from ..light.zonal_filter import filter_level_by

        settings = self.settings()
        lobe = sheen_lobe(alpha_from_roughness(settings["roughness"]))
        pyramid = pyramid_of(inputs["pixels"], settings["yaw_deg"])
        return {"level": filter_level_by(lobe, pyramid, settings["face_size"], settings["tolerance"])}


def sheen_chain(stage) -> dict:
    """The stages of all sheen levels of the probe of a stage, by role, the largest first."""
    levels = range(len(stage.probe.sheen_roughness))
    return {f"sheen_{level}": stage.of_same(FilterSheen, level=level) for level in levels}
