"""GatherIrradiance: diffuse light as a small cube and as spherical harmonics, and the sky's totals."""

import math

from .probe_stage import ProbeStage
from .pyramids import pyramid_of
from .sky_panorama import sky_of


class GatherIrradiance(ProbeStage):
    """`irradiance`: (6, m, m, 3) float32, irradiance E, not E/pi. `totals`: harmonics and totals as JSON."""

    version = 6
    title = "irradiance"

    def requires(self):
        return {"pixels": sky_of(self)}

    def files(self):
        return {"irradiance": self.work_file("irradiance.npy"), "totals": self.work_file("irradiance.json")}

    def settings(self):
        probe = self.probe
        return {
            "face_size": probe.irradiance_face_size,
            "sh_order": probe.irradiance_sh_order,
            "tolerance": probe.tolerance,
            "yaw_deg": probe.yaw_deg,
            "working": probe.working,
        }

    def make(self, inputs):
        from ..light.irradiance import irradiance_cube

        probe, pixels = self.probe, inputs["pixels"]
        pyramid = pyramid_of(pixels, probe.yaw_deg)
        cube = irradiance_cube(pyramid, probe.irradiance_face_size, probe.tolerance)
        return {"irradiance": cube, "totals": _totals(pixels.array(), probe)}


def _totals(panorama, probe):
    from ..light import colour, harmonics, photometry

    weights = colour.weights_of(colour.SPACES[probe.working])
    mean = photometry.mean_radiance(panorama)
    coefficients = harmonics.irradiance_coefficients(panorama, math.radians(probe.yaw_deg))
    windowed, strength = harmonics.weakest_window(coefficients)
    return {
        "sh": coefficients.tolist(),
        "sh_smallest": harmonics.smallest_irradiance(coefficients),
        "sh_window": {"strength": float(strength), "sh": windowed.tolist()},
        "mean_radiance": mean.tolist(),
        "mean_luminance": float(mean @ weights),
        "level_irradiance": photometry.level_irradiance(panorama).tolist(),
        "horizontal_illuminance": photometry.horizontal_illuminance(panorama, weights),
    }
