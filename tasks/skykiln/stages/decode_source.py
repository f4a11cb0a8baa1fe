"""DecodeSource: a source becomes a panorama of linear radiance, and facts about it."""

from pathlib import Path

from ..engine.digests import digest_file
from ..engine.pins import joint_pin
from ..errors import FileError
from .probe_stage import ProbeStage

READ = (
    "layout", "face_axes", "ground", "flip", "up", "pitch_deg", "roll_deg", "part", "layer", "allow_ldr",
    "exposure_ev", "horizontal_lux", "sun_lux", "patch", "white_luminance", "assumed", "working",
)  # fmt: skip


class DecodeSource(ProbeStage):
    """`pixels`: the panorama (H, W, 3) float32, repaired, upright but for its yaw, and scaled. `facts`: what
    was found, as JSON. `light`: its units and its sun's lost light, as JSON. `repairs`: where the picture
    held no light.

    The outputs have digests of their own, so that a new header over the same pixels stays here.
    """

    version = 3
    title = "panorama"

    def files(self):
        return {
            "pixels": self.work_file("panorama.npy"),
            "facts": self.work_file("source.json"),
            "light": self.work_file("light.json"),
            "repairs": self.work_file("repairs.npy"),
        }

    def pins(self):
        return {"source": self.pinned.pin}

    def settings(self):
        probe = self.probe
        settings = {name: getattr(probe, name) for name in READ}
        if probe.ground:
            kind, channels = probe.ground
            settings["ground"] = [kind, channels and list(channels)]
        if probe.patch:
            settings["patch"] = {**vars(probe.patch), "direction": list(probe.patch.direction)}
            settings["yaw_deg"] = probe.yaw_deg
        if probe.max_luminance and probe.sun_action == "keep":
            settings["max_luminance"] = probe.max_luminance
        if probe.sun_lux or (probe.horizontal_lux and (probe.patch or probe.white_luminance)):
            settings["sun_action"] = probe.sun_action  # a clipped sun may be restored in the sky
        return settings

    def make(self, inputs):
        from .intake import taken_in

        taken = taken_in(self.pinned.source_path, self._read(), self.probe)
        facts = {"digest": self.pinned.pin, **taken.facts}
        light = {"units": taken.units, "restored_lux": taken.facts["restored_lux"]}
        return {"pixels": taken.panorama, "facts": facts, "light": light, "repairs": taken.places}

    def _read(self):
        from ..formats.image import ReadOptions
        from ..formats.source_files import read_source
        from .intake import joined

        probe, paths = self.probe, [Path(path) for path in self.pinned.source_paths]
        options = ReadOptions(probe.part, probe.layer, probe.allow_ldr, self.pinned.file_pixels)
        images = [read_source(path, options) for path in paths]
        self._check_pin(paths)
        return joined(paths, images) if probe.faces else images[0]

    def _check_pin(self, paths):
        try:
            digest = joint_pin([digest_file(path) for path in paths])
        except OSError:
            digest = None
        if digest != self.pinned.pin:
            raise FileError(f"{paths[0]}: changed since the bake began; bake again")
