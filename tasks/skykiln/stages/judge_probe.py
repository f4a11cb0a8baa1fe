"""JudgeProbe: probe.json as it would be published, and the gates that hold it back."""

import json
from pathlib import Path

from ..engine.atomic import write_atomically
from ..engine.digests import digest_chunks, json_bytes, read_json
from .audit_probe import AuditProbe
from .change import change_of
from .decode_source import DecodeSource
from .draw_probe import DrawProbe
from .gates import PROBE_GATES, broken_gates
from .gather_irradiance import GatherIrradiance
from .pack_probe import PackProbe, packed_names
from .probe_record import probe_record
from .probe_stage import ProbeStage
from .separate_sun import SeparateSun
from .sky_panorama import is_sun_apart

ORIENTATION = ("flip", "up", "yaw_deg", "pitch_deg", "roll_deg")


class JudgeProbe(ProbeStage):
    """`probe.json`: its values to be. `judgement`: the gates that they break, whether the user has
    accepted them for what is packed now, and the audit in short. `comparison`: how they differ from what
    stands published, with a picture, `change`; beside the judgement, so that nobody who publishes reads it.

    The limits are in neither output, so that others publish nothing anew as long as all gates hold.
    """

    version = 3
    title = "judgement"

    def requires(self):
        packs = [self.of_same(PackProbe, pack=name) for name in packed_names(self.probe)]
        sun = {"sun": self.of_same(SeparateSun)} if is_sun_apart(self.probe) else {}
        return {
            "facts": self.of_same(DecodeSource),
            "light": self.of_same(DecodeSource),
            **sun,
            "totals": self.of_same(GatherIrradiance),
            "looks": self.of_same(DrawProbe),
            "thumbnails": self.of_same(DrawProbe),
            **{role: pack for pack in packs for role in pack.files()},
            "audit": self.of_same(AuditProbe),
        }

    def files(self):
        return {
            "probe.json": self.work_file("record.json"),
            "judgement": self.work_file("judgement.json"),
            "comparison": self.work_file("comparison.json"),
            "change": f"{self.pinned.pictures}/change.png",
        }

    def settings(self):
        probe, packs = self.probe, sorted(self.probe.packs, key=lambda entry: entry.name)
        return {
            "name": probe.name,
            "file": probe.file,
            "faces": list(probe.faces),
            "recipe": probe.recipe,
            "extra": json.loads(probe.extra),
            "cube_axes": self.pinned.cube_axes,
            "orientation": {name: getattr(probe, name) for name in ORIENTATION},
            "roughness": list(probe.roughness),
            "sheen_roughness": list(probe.sheen_roughness),
            "sheen_face_size": probe.sheen_face_size,
            "packs": [vars(entry) for entry in packs],
            "gates": json.loads(self.pinned.gates),
            "accepted": _accepted_subject(self.pinned),
        }

    def make(self, inputs):
        settings = self.settings()
        record = probe_record(settings, packed_names(self.probe), inputs)
        change, picture = change_of(record, inputs["thumbnails"], self.pinned)
        subject = digest_chunks(f"{role} {file.digest}\n".encode() for role, file in inputs.items())
        judgement = {
            "subject": subject,
            "broken": broken_gates(PROBE_GATES, {**record, "change": change}, settings["gates"]),
            "accepted": subject == settings["accepted"],
            "audit": _in_short(record["audit"]),
        }
        comparison = {"change": change}
        return {"probe.json": record, "judgement": judgement, "comparison": comparison, "change": picture}


def accept_judgement(pinned):
    """Let what is packed now be published whatever gates it breaks, until it changes."""
    subject = {"subject": read_judgement(pinned)["subject"]}
    write_atomically(_acceptance_file(pinned), [json_bytes(subject)])


def read_judgement(pinned) -> dict:
    """The values of a probe's judgement; of one that breaks nothing where there is none."""
    none = {"subject": "", "broken": [], "accepted": False, "audit": None}
    return none | read_json(Path(f"{pinned.work}/judgement.json"))


def _in_short(audit):
    """What night.json tells of an audit."""
    numbers = {key: audit["worst"][key] for key in ("map", "deviation", "z")}
    return {**{key: audit[key] for key in ("passed", "why", "texels", "share_passed")}, "worst": numbers}


def read_change(pinned) -> dict | None:
    """How what was judged last differs from what stood published then; None where it doesn't."""
    return read_json(Path(f"{pinned.work}/comparison.json")).get("change")


def _accepted_subject(pinned):
    return read_json(_acceptance_file(pinned)).get("subject")


def _acceptance_file(pinned):
    return Path(f"{pinned.work}/accepted.json")
