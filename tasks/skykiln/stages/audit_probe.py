"""AuditProbe: what was packed, read back and held against the panorama that it was made from."""

from ..engine.digests import digest_chunks
from .filter_level import specular_chain
from .filter_sheen import sheen_chain
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
        encoded = self._encoded()
        return {
            "pixels": sky_of(self),
            **{role: pack for pack in packs for role in pack.files()},
            **encoded.get("specular", {}),
            **encoded.get("sheen", {}),
        }

    def files(self):
        return {"audit": self.work_file("audit.json")}

    def settings(self):
        probe = self.probe
        return {
            "roughness": list(probe.roughness),
            "sheen_roughness": list(probe.sheen_roughness),
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
        encoded = {
            kind: [inputs[role].array() for role in chain] for kind, chain in self._encoded().items() if chain
        }
        return ProbeAudit(self.probe, inputs["pixels"].array(), files, stops, encoded)

    def _encoded(self):
        """The stages of the chains as they were filtered, where no packed file's rounding is known."""
        if any(pack.pixels != "bc6h" for pack in self.probe.packs):
            return {}
        return {"specular": specular_chain(self), "sheen": sheen_chain(self)}


def seed_of(inputs) -> int:
    """128 bits that follow from the digests of what is audited."""
    return int(digest_chunks(f"{role} {file.digest}\n".encode() for role, file in inputs.items())[:32], 16)
