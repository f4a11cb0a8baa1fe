"""PublishProbe: the packed files go where renderers look for them, probe.json last."""

import json
from pathlib import Path

from .change import published_thumbnails
from .draw_probe import DrawProbe
from .judge_probe import JudgeProbe, read_judgement
from .pack_probe import PackProbe, packed_names
from .probe_stage import ProbeStage


class PublishProbe(ProbeStage):
    """All published files of a probe. While a gate holds it, those of an earlier night stay.

    `thumbnails` stays in the work folder: what the next change is told against.
    """

    version = 3
    title = "published files"
    published = True

    def requires(self):
        judgement = self.of_same(JudgeProbe)
        packed = {
            name: self.of_same(PackProbe, pack=pack)
            for pack, names in packed_names(self.probe).items()
            for name in names
        }
        drawn = {"thumbnails": self.of_same(DrawProbe)}
        return {"judgement": judgement, **drawn, **packed, "probe.json": judgement}

    def files(self):
        names = [name for names in packed_names(self.probe).values() for name in names]
        published = {name: f"{self.pinned.published}/{name}" for name in (*names, "probe.json")}
        return {"thumbnails": published_thumbnails(self.pinned), **published}

    @property
    def stamp_path(self):
        return self.work_file("probe.json.stamp")

    def held_by(self):
        judgement = read_judgement(self.pinned)
        if judgement["accepted"]:
            return ()
        return tuple(f"{broken['gate']}: {broken['why']}" for broken in judgement["broken"])

    def make(self, inputs):
        return {name: inputs[name].bytes() for name in self.files()}

    def superseded(self):
        """Files that the standing probe.json names and the new one doesn't: packs no longer asked for."""
        folder = Path(self.pinned.published)
        return [folder / name for name in _named_files(folder / "probe.json") if name not in self.files()]


def _named_files(path):
    try:
        record = json.loads(path.read_bytes())
        kinds = [record[kind] for kind in ("specular", "irradiance", "sheen") if kind in record]
        names = [entry["file"] for kind in kinds for entry in kind["files"]]
    except (OSError, ValueError, KeyError, TypeError):
        return []
    return [name for name in names if name == Path(name).name]
