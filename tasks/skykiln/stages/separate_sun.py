"""SeparateSun: the sun becomes a directional light, and the sky is left without it."""

import math

from .decode_source import DecodeSource
from .probe_stage import ProbeStage


class SeparateSun(ProbeStage):
    """`pixels`: (H, W, 3) float32, the sky that is left. `sun`: the light as JSON, its direction turned by
    the probe's yaw; {"sun": None} where none shines."""

    version = 1
    title = "sky without its sun"

    def requires(self):
        return {"panorama": self.of_same(DecodeSource)}

    def files(self):
        return {"pixels": self.work_file("sky.npy"), "sun": self.work_file("sun.json")}

    def settings(self):
        return {"working": self.probe.working, "yaw_deg": self.probe.yaw_deg}

    def make(self, inputs):
        from ..light.colour import WORKING_SPACES, weights_of
        from ..light.separate_sun import separate_sun

        weights = weights_of(WORKING_SPACES[self.probe.working])
        sky, sun = separate_sun(inputs["panorama"].array(), weights)
        return {"pixels": sky, "sun": {"sun": sun and _told(sun, weights, self.probe.yaw_deg)}}


def _told(sun, weights, yaw_deg):
    from ..light.orientation import turn_of

    illuminance = float(sun.irradiance @ weights)
    return {
        "direction": (turn_of(math.radians(yaw_deg)) @ sun.direction).tolist(),
        "angular_radius_deg": math.degrees(sun.angular_radius),
        "illuminance": illuminance,
        "irradiance": sun.irradiance.tolist(),
        "colour": (sun.irradiance / illuminance).tolist(),
        "contrast_ev": sun.contrast_ev,
        "clipped": sun.clipped,
    }
