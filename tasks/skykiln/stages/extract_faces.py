"""ExtractFaces: the panorama becomes six faces, level 0 of the specular chain."""

import math

from .probe_stage import ProbeStage
from .sky_panorama import sky_of


class ExtractFaces(ProbeStage):
    """(6, n, n, 3) float32, the mean radiance over each texel's footprint, turned by the probe's yaw."""

    version = 2
    title = "faces"

    def requires(self):
        return {"pixels": sky_of(self)}

    def files(self):
        return {"faces": self.work_file("faces.npy")}

    def settings(self):
        return {"face_size": self.probe.face_size or "auto", "yaw_deg": self.probe.yaw_deg}

    def make(self, inputs):
        from ..light.faces import extract_faces

        panorama = inputs["pixels"].array()
        size = face_size_of(self.probe, panorama)
        return {"faces": extract_faces(panorama, size, math.radians(self.probe.yaw_deg))}


def face_size_of(probe, panorama) -> int:
    """The face size that a probe's recipe asks for, for this panorama."""
    return probe.face_size or auto_face_size(panorama.shape[1])


def auto_face_size(panorama_width: int) -> int:
    """The largest power of two that is at most a quarter of the panorama's width, at least 1."""
    return 1 << max(panorama_width // 4, 1).bit_length() - 1
