"""AuditProbe: what was packed, read back and held against the panorama that it was made from."""

from ..engine.digests import digest_chunks
from .extract_faces import ExtractFaces
from .filter_level import FilterLevel
from .pack_probe import PackProbe, packed_names
from .probe_stage import ProbeStage
from .sky_panorama import sky_of


class AuditProbe(ProbeStage):
    """`audit.json`: the verdict, as probe.json tells it. A probe that fails its audit is no failed stage:
    a gate decides what follows.

    All randomness follows from the digests of what is audited.
    """

    version = 1
    title = "audit"

    def requires(self):
        packs = [self.of_same(PackProbe, pack=name) for name in packed_names(self.probe)]
        return {
            "pixels": sky_of(self),
            **{role: pack for pack in packs for role in pack.files()},
            **self._levels(),
        }

    def files(self):
        return {"audit": self.work_file("audit.json")}

    def settings(self):
        probe = self.probe
        return {
            "roughness": list(probe.roughness),
            "tolerance": probe.tolerance,
            "yaw_deg": probe.yaw_deg,
            "cube_axes": {pack.name: pack.cube_axes for pack in probe.packs},
        }

    def make(self, inputs):
        audit = self.audit(inputs, {name: inputs[name].bytes() for name in self.packed})
        return {"audit": audit.record([audit.look(seed_of(inputs))])}

    @property
    def packed(self):
        """Names of the packed files."""
        return [name for names in packed_names(self.probe).values() for name in names]

    def audit(self, inputs, files):
        """The ProbeAudit of some inputs and of the bytes of packed files."""
        from .auditing import ProbeAudit

        pack = next(iter(packed_names(self.probe)))
        stops = inputs[f"{pack}.json"].json()["storage_ev"]
        levels = [inputs[role].array() for role in self._levels()]
        return ProbeAudit(self.probe, inputs["pixels"].array(), files, stops, levels)

    def _levels(self):
        """The stages of the levels as they were filtered, where no packed file's rounding is known."""
        if any(pack.pixels != "bc6h" for pack in self.probe.packs):
            return {}
        levels = range(1, len(self.probe.roughness))
        filtered = {f"level_{level}": self.of_same(FilterLevel, level=level) for level in levels}
        return {"faces": self.of_same(ExtractFaces), **filtered}


def seed_of(inputs) -> int:
    """128 bits that follow from the digests of what is audited."""
    return int(digest_chunks(f"{role} {file.digest}\n".encode() for role, file in inputs.items())[:32], 16)
