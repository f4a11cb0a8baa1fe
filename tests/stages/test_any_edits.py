"""Any edits in any order: what runs is what an independent model says, no more and no less.

After each bake the published files are also those of a bake into an empty folder.
"""

import copy
import functools
import json
import tempfile
from pathlib import Path

import pytest
from hypothesis import settings
from hypothesis import strategies as st
from hypothesis.stateful import (
    RuleBasedStateMachine,
    initialize,
    precondition,
    rule,
    run_state_machine_as_test,
)
from staleness_model import StalenessModel, files_of

from skykiln.engine import lots, running
from skykiln.engine.prune import leftovers, remove_leftovers
from skykiln.engine.running import write_outputs
from skykiln.stages import shares
from skykiln.stages.audit_probe import AuditProbe
from skykiln.stages.decode_source import DecodeSource
from skykiln.stages.draw_probe import DrawProbe
from skykiln.stages.extract_faces import ExtractFaces
from skykiln.stages.filter_level import FilterLevel
from skykiln.stages.filter_sheen import FilterSheen
from skykiln.stages.gather_irradiance import GatherIrradiance
from skykiln.stages.judge_probe import JudgeProbe
from skykiln.stages.pack_probe import PackProbe
from skykiln.stages.publish_probe import PublishProbe
from skykiln.stages.separate_sun import SeparateSun
from skykiln.stages.tabulate_brdf import TabulateBrdf
from tiny_pipeline import TinyPipeline, published, write_sky

KINDS = [
    AuditProbe,
    DecodeSource,
    DrawProbe,
    ExtractFaces,
    FilterLevel,
    FilterSheen,
    GatherIrradiance,
    JudgeProbe,
    PackProbe,
    PublishProbe,
    SeparateSun,
    TabulateBrdf,
]
NAMES = ["ferry_noon", "quay_night", "stair up"]
PLAIN = {"container": "ktx2", "pixels": "rgba16f"}
MIRRORED = {**PLAIN, "name": "mirrored", "cube_axes": "direct"}

names = st.sampled_from(NAMES)
recipes = st.sampled_from(["tiny", "other"])


class AnyEdits(RuleBasedStateMachine):
    """Edits of sources, pipeline, code and outputs, with bakes in between."""

    def __init__(self):
        super().__init__()
        self.scratch = tempfile.TemporaryDirectory()
        self.patch = pytest.MonkeyPatch()
        self.pipeline = TinyPipeline(Path(self.scratch.name))
        self.asked = self.pipeline.settings
        self.asked["recipes"]["tiny"] |= {"pack": [PLAIN], "sun": {"action": "keep"}}
        self.asked["recipes"]["other"] = copy.deepcopy(self.asked["recipes"]["tiny"])
        self.asked["sources"] = {}
        self.model = StalenessModel()
        self.ran = []
        for module in (lots, running):
            self.patch.setattr(module, "write_outputs", self._noted)

    def teardown(self):
        try:
            self.bake_in_lots()
        finally:
            self.patch.undo()
            self.scratch.cleanup()

    def _noted(self, stage, verdict, on_disk):
        self.ran.append(stage.label)
        return write_outputs(stage, verdict, on_disk)

    def _source(self, name):
        return self.pipeline.folder / f"{name}.exr"

    @initialize()
    def first_bake(self):
        for name in NAMES[:2]:
            self.add_entry(name, "tiny")
        for seed, name in enumerate(NAMES):
            self.export_source(name, seed, "")
        self.bake_in_lots()

    @rule(name=names, seed=st.integers(0, 2), remark=st.sampled_from(["", "again"]))
    def export_source(self, name, seed, remark):
        write_sky(self._source(name), seed=seed, **({"comments": remark} if remark else {}))

    @rule(name=names)
    def spoil_source(self, name):
        self._source(name).write_text("not a picture")

    @rule(name=names)
    def delete_source(self, name):
        self._source(name).unlink(missing_ok=True)

    @rule(name=names, recipe=recipes)
    def add_entry(self, name, recipe):
        entry = {"file": f"{name}.exr", "recipe": recipe, "yaw_deg": 0, "exposure_ev": 0, "extra": {}}
        self.asked["sources"].setdefault(name, entry)

    @precondition(lambda self: len(self.asked["sources"]) > 1)
    @rule(name=names)
    def remove_entry(self, name):
        if len(self.asked["sources"]) > 1:
            self.asked["sources"].pop(name, None)

    @rule(
        name=names,
        change=st.sampled_from(
            [
                {"yaw_deg": 0}, {"yaw_deg": 90}, {"exposure_ev": 0}, {"exposure_ev": 1},
                {"extra": {}}, {"extra": {"floor": 2}}, {"recipe": "tiny"}, {"recipe": "other"},
            ]
        ),
    )  # fmt: skip
    def edit_entry(self, name, change):
        if name in self.asked["sources"]:
            self.asked["sources"][name] |= change

    @rule(recipe=recipes, roughness=st.sampled_from([[0.5], [0.6], [0.5, 1], None]))
    def edit_sheen(self, recipe, roughness):
        levels = roughness and {"levels": len(roughness), "roughness": roughness, "face_size": 2}
        self.asked["recipes"][recipe]["sheen"] = levels

    @rule(recipe=recipes, roughness=st.sampled_from([[0, 0.5, 1], [0, 0.4, 1], [0, 0.5]]))
    def edit_roughness(self, recipe, roughness):
        self.asked["recipes"][recipe]["specular"] |= {"roughness": roughness, "levels": len(roughness)}

    @rule(recipe=recipes, action=st.sampled_from(["keep", "separate"]))
    def edit_sun(self, recipe, action):
        self.asked["recipes"][recipe]["sun"] = {"action": action}

    @rule(recipe=recipes, tolerance=st.sampled_from([0.05, 0.02]))
    def edit_tolerance(self, recipe, tolerance):
        self.asked["recipes"][recipe]["specular"]["tolerance"] = tolerance

    @rule(recipe=recipes, pack=st.sampled_from([[PLAIN], [MIRRORED], [PLAIN, MIRRORED]]))
    def edit_pack(self, recipe, pack):
        self.asked["recipes"][recipe]["pack"] = pack

    @rule(recipe=recipes, size=st.sampled_from([2, 4]))
    def edit_irradiance(self, recipe, size):
        self.asked["recipes"][recipe]["irradiance"]["face_size"] = size

    @rule(size=st.sampled_from([4, 8]))
    def edit_table(self, size):
        self.asked["brdf"]["size"] = size

    @rule(kind=st.sampled_from(KINDS))
    def edit_code(self, kind):
        self.patch.setattr(kind, "version", kind.version + 1)

    @rule(data=st.data(), deleted=st.booleans())
    def spoil_output(self, data, deleted):
        file = data.draw(st.sampled_from(files_of(self.asked)))
        path = self.pipeline.build / file
        if path.exists():
            path.unlink() if deleted else path.write_bytes(b"spoiled")
            self.model.spoiled.add(file)

    @rule()
    def prune(self):
        """Forgets what no entry asks for now, and must change nothing else."""
        found = leftovers(self.pipeline.build / "work", self.pipeline.snapshot().targets)
        remove_leftovers(self.pipeline.build, found)
        self.model.prune(self.asked)

    @rule()
    def bake_in_lots(self):
        self.patch.setattr(shares, "BIG_SECONDS", 0.2)
        self.bake()

    @rule()
    def bake_stage_by_stage(self):
        self.patch.setattr(shares, "BIG_SECONDS", 0.0)
        self.bake()

    def bake(self):
        before = published(self.pipeline.build)
        self.ran.clear()
        self.pipeline.bake()
        ran = sorted(self.ran)
        sources = {name: self._good_bytes(name) for name in NAMES}
        clean = clean_bake(json.dumps(self.asked), _versions(), tuple(sources.items()))
        assert ran == sorted(self.model.bake(self.asked, sources, dict(_versions()), clean))
        expected = published(clean)
        for name in self.asked["sources"]:
            of_name = f"probes/{name}/"
            wanted = before if sources[name] is None else expected
            found = published(self.pipeline.build)
            assert _below(found, of_name) == _below(wanted, of_name)
        assert _below(published(self.pipeline.build), "brdf/") == _below(expected, "brdf/")

    def _good_bytes(self, name):
        path = self._source(name)
        data = path.read_bytes() if path.exists() else b""
        return data if data[:4] == b"\x76\x2f\x31\x01" else None


def _below(files, folder):
    return {name: data for name, data in files.items() if name.startswith(folder)}


def _versions():
    return tuple((kind.__name__, kind.version) for kind in KINDS)


@functools.cache
def clean_bake(asked, versions, sources) -> Path:
    """The build folder of a bake into an empty folder. `versions` only tells bakes apart."""
    folder = Path(tempfile.mkdtemp(prefix="clean_", dir=clean_bake.scratch))
    pipeline = TinyPipeline(folder, probes=())
    pipeline.settings = json.loads(asked)
    for name, data in sources:
        (folder / f"{name}.exr").write_bytes(data or b"")
    kept = {n: e for n, e in pipeline.settings["sources"].items() if dict(sources)[n] is not None}
    # At least one entry is asked for by every pipeline; one that fails leaves nothing behind.
    pipeline.settings["sources"] = kept or pipeline.settings["sources"]
    pipeline.bake()
    return pipeline.build


def _check(tmp_path, examples, steps):
    clean_bake.scratch = tmp_path
    clean_bake.cache_clear()
    many = settings(max_examples=examples, stateful_step_count=steps, deadline=None, derandomize=True)
    run_state_machine_as_test(AnyEdits, settings=many)


def test_stages_that_run_are_those_of_the_model(tmp_path):
    _check(tmp_path, examples=6, steps=25)


@pytest.mark.long
def test_stages_that_run_are_those_of_the_model_in_many_histories(tmp_path):
    _check(tmp_path, examples=200, steps=40)
