"""Stage: the base of all stages, a Luigi task that reruns only when a content change reaches it.

A stage declares

    version     bumped when its run would write other bytes
    title       what it makes, in words; owner: the name of the probe it makes it for
    files()     role -> path of each output, in the order in which they are to appear
    requires()  role -> the stage that is read; one with several outputs gives the one named like the role
    settings()  the parameters that its run itself reads, as JSON would give them back
    make(inputs)  role -> Input in; role -> array, dict (for JSON) or bytes out
    held_by()   sentences, if something that it reads forbids it to run: it is held then

Parameters that are only handed down to other stages stay out of `settings`: their effect arrives
through the digests of the inputs.
"""

import json
from functools import cached_property

import luigi

from .budget import resources_of
from .running import run_stage
from .staleness import staleness


class Stage(luigi.Task):
    """One step of the bake."""

    task_namespace = "skykiln"
    version = 1
    published = False  # whether others than stages read the outputs
    sketched = False
    expected_bytes = 0  # of memory, while it runs

    # Which night it runs in, for its stamp alone: not what it makes, so not significant.
    night = luigi.Parameter(default="", significant=False)

    @classmethod
    def sketch(cls, night="", **parameters) -> "Stage":
        """The same stage without Luigi's task id and parsing of parameters, a hundredth of the cost.

        `plan`, lots and completeness compare stages by the thousand; only what Luigi itself is to
        run becomes a full task.
        """
        stage = object.__new__(cls)
        vars(stage).update(parameters, night=night, sketched=True)
        return stage

    def anew(self) -> "Stage":
        """A copy that has not been asked for anything yet: what is found below it goes with it."""
        copy = object.__new__(type(self))
        forgotten = ("below", "paths")
        vars(copy).update((name, value) for name, value in vars(self).items() if name not in forgotten)
        return copy

    def full(self) -> "Stage":
        """The Luigi task of a sketch."""
        names = self.get_param_names(include_significant=True)
        return type(self)(**{name: getattr(self, name) for name in names})

    def beside(self, other: type["Stage"], **parameters) -> "Stage":
        """Another stage, sketched if this one is."""
        make = other.sketch if self.sketched else other
        return make(night=self.night, **parameters)

    @property
    def resources(self) -> dict:
        """A stage that is a Luigi task of its own is large: its kernels take all cores."""
        return resources_of(cores=1, memory=self.expected_bytes)

    @property
    def label(self) -> str:
        """What the stage makes, and for whom: 'specular level 3 of ferry_noon'."""
        return f"{self.title} of {self.owner}"

    def requires(self) -> dict:
        return {}

    @cached_property
    def below(self) -> dict:
        """What `requires` says, asked once. Stages whose chain is looked at are made anew for it."""
        return self.requires()

    @cached_property
    def paths(self) -> dict:
        """What `files` says, asked once."""
        return self.files()

    def settings(self) -> dict:
        return {}

    def pins(self) -> dict:
        """Role -> digest of inputs that no stage makes."""
        return {}

    def held_by(self) -> tuple:
        """Sentences that tell what forbids this stage to run; asked when all that it reads is ready."""
        return ()

    def superseded(self) -> list:
        """Files of earlier runs that this run no longer writes."""
        return []

    @property
    def stamp_path(self) -> str:
        """Where the stamp lies: beside the first output."""
        return f"{next(iter(self.paths.values()))}.stamp"

    @property
    def seal_path(self) -> str:
        """Where the seal lies of the target that the stage works for."""
        return f"{self.stamp_path.removesuffix('.stamp')}.seal"

    @property
    def wanted(self) -> str:
        """All that decides what this stage, as a target, and the stages below it make; no folders."""
        return json.dumps(self.settings())

    @staticmethod
    def known_versions() -> tuple:
        """Class and version of every stage that this process knows."""
        return tuple(_versions_below(Stage))

    def output_role(self, role: str) -> str:
        """Which output is meant by whoever reads this stage under `role`."""
        return role if role in self.paths else next(iter(self.paths))

    def output(self):
        return {role: luigi.LocalTarget(path) for role, path in self.paths.items()}

    def complete(self) -> bool:
        return staleness(self, {}).settled

    def run(self):
        # Luigi has scheduled what may run before it was known whether it must, or is held: the cut-off.
        verdict = staleness(self, {})
        if not verdict.settled:
            run_stage(self, verdict)

    def __repr__(self):
        return f"{type(self).__name__}({self.label})"


def _versions_below(family):
    for each in family.__subclasses__():
        yield each.__name__, each.version
        yield from _versions_below(each)
