"""What is baked already, looked at again: audits and sampled levels of probes, on demand."""

import time
from pathlib import Path
from typing import NamedTuple

from ..engine.chains import chain_of
from ..engine.running import inputs_of
from ..engine.staleness import staleness
from ..errors import SkykilnError
from .audit_probe import AuditProbe, seed_of

PUBLISHED, HELD = "as published", "as packed, held"


class Audited(NamedTuple):
    """One probe's audit on demand; `record` is as in probe.json."""

    name: str
    what: str
    record: dict


class AuditOnDemand:
    """The audit of a target that is up to date, at other texels than those of the night.

    Raises: SkykilnError where the target isn't baked as the pipeline file asks for it
    """

    def __init__(self, target):
        chain = chain_of(target)
        self.name, self.what = target.owner, HELD if chain.held_by else PUBLISHED
        check_baked(chain)
        stage = target.of_same(AuditProbe)
        inputs = inputs_of(stage, staleness(stage, {}))
        folder = Path(target.pinned.work, "packed") if chain.held_by else Path(target.pinned.published)
        self._seed, self._looks = seed_of(inputs), []
        self._audit = stage.audit(inputs, {name: (folder / name).read_bytes() for name in stage.packed})

    def look(self, per_face, budget=0.0, told=lambda seconds: None):
        """Look at texels once, and anew until `budget` seconds are over.

        Parameters: per_face : texels drawn evenly on each face; as many go where the light is
                    told : called with the seconds that have gone after each look
        """
        began, gone = time.monotonic(), 0.0
        while not self._looks or gone < budget:
            seed = (self._seed + 1 + len(self._looks)) % 2**128
            self._looks.append(self._audit.look(seed, per_face))
            gone = time.monotonic() - began
            told(gone)
        return Audited(self.name, self.what, self._audit.record(self._looks))


def check_baked(chain):
    """See that a chain is up to date, but for what a gate holds."""
    if chain.stale:
        name = chain.target.owner
        raise SkykilnError(f"{name}: is not baked as the pipeline file asks for it; skykiln bake {name}")
