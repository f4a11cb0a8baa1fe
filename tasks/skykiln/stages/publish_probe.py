"""PublishProbe: the packed files go where renderers look for them, probe.json last."""

import json
from pathlib import Path

from .decode_source import DecodeSource
from .gather_irradiance import GatherIrradiance
from .pack_probe import PackProbe, packed_names
from .probe_record import probe_record
from .probe_stage import ProbeStage


class PublishProbe(ProbeStage):
    """All published files of a probe."""

    version = 1
    title = "published files"
    published = True

    def requires(self):
        packs = [self.of_same(PackProbe, pack=name) for name in packed_names(self.probe)]
        return {
            "facts": self.of_same(DecodeSource),
            "totals": self.of_same(GatherIrradiance),
            **{role: pack for pack in packs for role in pack.files()},
        }

    def files(self):
        names = [name for names in packed_names(self.probe).values() for name in names]
        return {name: f"{self.pinned.published}/{name}" for name in (*names, "probe.json")}

    @property
    def stamp_path(self):
        return self.work_file("probe.json.stamp")

    def settings(self):
        probe, packs = self.probe, sorted(self.probe.packs, key=lambda entry: entry.name)
        return {
            "name": probe.name,
            "file": probe.file,
            "recipe": probe.recipe,
            "extra": json.loads(probe.extra),
            "cube_axes": self.pinned.cube_axes,
            "units": "relative" if probe.horizontal_lux is None else "cd/m2",
            "yaw_deg": probe.yaw_deg,
            "roughness": list(probe.roughness),
            "irradiance_pixels": probe.irradiance_pixels,
            "packs": [vars(entry) for entry in packs],
        }

    def make(self, inputs):
        names = list(self.files())[:-1]
        packed = {name: inputs[name].bytes() for name in names}
        return {**packed, "probe.json": probe_record(self.settings(), packed_names(self.probe), inputs)}

    def superseded(self):
        """Files that the standing probe.json names and the new one doesn't: packs no longer asked for."""
        folder = Path(self.pinned.published)
        return [folder / name for name in _named_files(folder / "probe.json") if name not in self.files()]


def _named_files(path):
    try:
        record = json.loads(path.read_bytes())
        names = [entry["file"] for kind in ("specular", "irradiance") for entry in record[kind]["files"]]
    except (OSError, ValueError, KeyError, TypeError):
        return []
    return [name for name in names if name == Path(name).name]
