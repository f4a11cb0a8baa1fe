"""SeparateSun: the sun becomes a directional light, and the sky is left without it."""

import math

from .decode_source import DecodeSource
from .probe_stage import ProbeStage


class SeparateSun(ProbeStage):
    """`pixels`: (H, W, 3) float32, the sky that is left. `sun`: the light as JSON, its direction turned by
    the probe's yaw, None where none shines; and what the probe's `max_luminance` took from the sky."""

    version = 2
    title = "sky without its sun"

    def requires(self):
        source = self.of_same(DecodeSource)
        return {"pixels": source, "light": source}

    def files(self):
        return {"pixels": self.work_file("sky.npy"), "sun": self.work_file("sun.json")}

    def settings(self):
        names = ("working", "yaw_deg", "max_luminance")
        return {name: getattr(self.probe, name) for name in names}

    def make(self, inputs):
        from ..light.colour import SPACES, weights_of
        from ..light.separate_sun import restored_sun, separate_sun
        from .intake import under_limit

        probe, weights = self.probe, weights_of(SPACES[self.probe.working])
        sky, sun = separate_sun(inputs["pixels"].array(), weights)
        lost = inputs["light"].json()["restored_lux"]
        if sun and lost > 0:
            sun = restored_sun(sun, lost, weights)
        facts = {"sun": sun and _told(sun, weights, probe.yaw_deg), "limited": None}
        if probe.max_luminance is not None:
            sky, facts["limited"] = under_limit(sky, probe.max_luminance, weights)
        return {"pixels": sky, "sun": facts}


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
