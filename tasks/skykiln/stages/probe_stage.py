"""What all stages of a probe share: the pinned probe they carry, and where its files lie.

Stages import `light` and `formats` inside `make`: what is up to date is then found to be so without
loading the numerics.
"""

import dataclasses
import functools
import json
import zlib
from pathlib import PurePath

import luigi

from ..config import Probe, canonical_json
from ..engine.stage import Stage
from .memory import expected_bytes


@dataclasses.dataclass(frozen=True)
class PinnedProbe:
    """A probe, the digest of its source's bytes, and the folders of its pipeline.

    source_bytes : size of the source's file when it was pinned; 0 where it can't be read
    root, build_dir : absolute paths; cube_axes : the pipeline's, which packs may override
    gates : canonical JSON of the limits that a probe is judged by, by their dotted keys
    max_pixels : the largest source picture; of a cube the six faces together
    """

    probe: Probe
    pin: str
    source_bytes: int
    root: str
    build_dir: str
    cube_axes: str
    gates: str
    max_pixels: int

    def __post_init__(self):
        if ".." in PurePath(self.probe.name).parts or PurePath(self.probe.name).is_absolute():
            raise ValueError(f"the name {self.probe.name!r} leads out of the build folder")

    def to_json(self) -> str:
        return canonical_json({**vars(self), "probe": json.loads(self.probe.to_json())})

    @classmethod
    def from_json(cls, text: str) -> "PinnedProbe":
        fields = json.loads(text)
        return cls(**{**fields, "probe": Probe.from_json(canonical_json(fields["probe"]))})

    @property
    def wanted(self) -> str:
        """All that decides what is made of the probe, as text. No folders: machines have their own."""
        folders = ("root", "build_dir")
        said = {name: value for name, value in vars(self).items() if name not in (*folders, "probe")}
        return f"{canonical_json(said)} {self.probe.to_json()}"

    @property
    def file_pixels(self) -> int:
        """The largest picture that one of the source's files may hold."""
        return self.max_pixels // len(self.probe.files)

    @property
    def source_path(self) -> str:
        """The source's file; of six, the first."""
        return self.source_paths[0]

    @property
    def source_paths(self) -> tuple[str, ...]:
        files = self.probe.files
        return tuple(f"{self.root}/{file}" if file[:1] != "/" else file for file in files)

    @property
    def work(self) -> str:
        """The folder of the probe's intermediates and stamps."""
        return f"{self.build_dir}/work/{self.probe.name}"

    @property
    def published(self) -> str:
        """The folder that renderers read."""
        return f"{self.build_dir}/probes/{self.probe.name}"

    @property
    def pictures(self) -> str:
        """The folder of the probe's page and pictures, in the report."""
        return f"{self.build_dir}/report/probes/{self.probe.name}"


class PinnedProbeParameter(luigi.Parameter):
    """A pinned probe as canonical JSON."""

    parse = staticmethod(PinnedProbe.from_json)
    serialize = staticmethod(functools.lru_cache(maxsize=4096)(PinnedProbe.to_json))


class ProbeStage(Stage):
    """A stage of one probe."""

    pinned = PinnedProbeParameter()

    @property
    def probe(self) -> Probe:
        return self.pinned.probe

    @property
    def owner(self):
        return self.pinned.probe.name

    @property
    def wanted(self):
        return self.pinned.wanted

    @property
    def seal_path(self):
        return self.work_file("probe.json.seal")

    @property
    def expected_bytes(self):
        return expected_bytes(self.pinned)

    @property
    def priority(self):
        # One for all stages of a probe: the scheduler then ends one probe before it begins the next,
        # and the probe's node pyramid is still at hand.
        return zlib.crc32(self.owner.encode())

    def of_same(self, stage, **parameters):
        """Another stage of the same probe."""
        return self.beside(stage, pinned=self.pinned, **parameters)

    def work_file(self, name: str) -> str:
        return f"{self.pinned.work}/{name}"
