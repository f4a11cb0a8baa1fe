"""From the pipeline file to the targets of a bake: what there is to make, with all sources pinned."""

import difflib
import fnmatch

from ..config import Pipeline, canonical_json
from ..engine.night import now
from ..engine.pins import Pins, joint_pin
from ..engine.shards import Shard
from ..errors import PipelineError
from ..limits import MAX_PIXELS, largest_file
from .gates import PROBE_GATES
from .kernels import EXTRAS, is_installed
from .probe_stage import PinnedProbe
from .publish_probe import PublishProbe
from .tabulate_brdf import TabulateBrdf


class Snapshot:
    """The targets of some probes of a pipeline, as sketches, and the pins that they hold to.

    brdf : the stage of the shared table; probes : one PublishProbe per probe
    night : ISO 8601 time of the night that they are made in
    verified : whether bytes are read again where size and time would do
    shard : whose probes they are alone; None for all
    """

    def __init__(
        self,
        pipeline: Pipeline,
        patterns=(),
        night: str | None = None,
        verified: bool = False,
        shard: Shard | None = None,
    ):
        self.pipeline = pipeline
        self.verified = verified
        self.shard = shard
        self.night = night or now()
        # Shards write at the same time: each its own.
        name = f".pins.{shard.file_name}.json" if shard else ".pins.json"
        self.pins = Pins(pipeline.build_dir / "work" / name, verified)
        self.brdf = TabulateBrdf.sketch(
            night=self.night, build_dir=str(pipeline.build_dir), size=pipeline.brdf_size
        )
        limits = {key: limit for key, limit in pipeline.gates.items() if key in PROBE_GATES}
        self._gates = canonical_json(limits)
        chosen = matching(pipeline.probes(), patterns)
        if shard:
            chosen = [probe for probe in chosen if shard.owns(probe.name)]
        check_extras(pipeline, chosen)
        pinned = [self._pinned(probe) for probe in chosen]
        self.probes = [PublishProbe.sketch(night=self.night, pinned=probe) for probe in pinned]

    @property
    def targets(self) -> list:
        return [self.brdf, *self.probes]

    @property
    def all_probes(self) -> list:
        """The targets of all probes of the pipeline: those that were not asked for unpinned, to look at."""
        asked = {target.owner: target for target in self.probes}
        return [
            asked.get(probe.name) or PublishProbe.sketch(pinned=self._pinned(probe, ""))
            for probe in self.pipeline.probes()
        ]

    def _pinned(self, probe, pin=None):
        root = self.pipeline.root
        return PinnedProbe(
            probe=probe,
            pin=self._pin(probe) if pin is None else pin,
            source_bytes=sum(_size(root / file) for file in probe.files),
            root=str(root),
            build_dir=str(self.pipeline.build_dir),
            cube_axes=self.pipeline.cube_axes,
            gates=self._gates,
            max_pixels=self._max_pixels,
        )

    def _pin(self, probe):
        largest = largest_file(self._max_pixels // len(probe.files))
        return joint_pin(self.pins.pin(self.pipeline.root / file, largest) for file in probe.files)

    @property
    def _max_pixels(self):
        return self.pipeline.max_pixels or MAX_PIXELS


def _size(path):
    try:
        return path.stat().st_size
    except OSError:
        return 0


def check_extras(pipeline: Pipeline, probes):
    """See that every coding that the probes ask for can be made, before any stage runs.

    Raises: PipelineError naming each recipe and the extra that it needs
    """
    asked = {(probe.recipe, pack.pixels) for probe in probes for pack in probe.packs}
    lost = sorted((recipe, pixels) for recipe, pixels in asked if not is_installed(pixels))
    if lost:
        told = (f"recipes.{recipe}.pack: {_needed(pixels)}" for recipe, pixels in lost)
        raise PipelineError([f"{pipeline.path}: {sentence}" for sentence in told])


def _needed(pixels):
    install = f"install the extra: pip install 'skykiln[{pixels}]'"
    return f"pixels: {pixels} needs the package {EXTRAS[pixels]}; {install}"


def matching(probes, patterns) -> list:
    """The probes whose names match one of the patterns; all of them when there are none.

    Raises: PipelineError naming every pattern that matches nothing, with the nearest name
    """
    names = [probe.name for probe in probes]
    chosen = {pattern: _matches(pattern, names) for pattern in patterns}
    lost = [pattern for pattern, found in chosen.items() if not found]
    if lost:
        raise PipelineError([_nothing_called(pattern, names) for pattern in lost])
    wanted = set().union(*chosen.values()) if patterns else set(names)
    return [probe for probe in probes if probe.name in wanted]


def _matches(pattern, names):
    """A probe's own name means that probe, whatever characters of patterns it holds."""
    return {pattern} if pattern in names else {n for n in names if fnmatch.fnmatchcase(n, pattern)}


def _nothing_called(pattern, names):
    near = difflib.get_close_matches(pattern, names, n=1, cutoff=0.4)
    more = f" and {len(names) - 8} more" if len(names) > 8 else ""
    hint = f"did you mean '{near[0]}'?" if near else f"there are {', '.join(names[:8])}{more}"
    return f"no probe is called '{pattern}'; {hint}"
