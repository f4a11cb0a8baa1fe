"""`skykiln audit` and `skykiln noise`: what is baked, looked at again."""

import re

import numpy as np
import pytest

from skykiln.cli import main
from skykiln.errors import ALL_WELL, GATE_BROKEN, SOURCE_FAILED
from skykiln.formats.exr_levels import read_exr_levels
from skykiln.light.cube_axes import from_cube_space
from skykiln.stages import packing
from tiny_pipeline import TinyPipeline, everything, write_sky


@pytest.fixture
def pipeline(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    pipeline = TinyPipeline(tmp_path)
    pipeline.bake()
    return pipeline


def run(capsys, arguments):
    status = main(arguments.split())
    told = capsys.readouterr()
    return status, told.out.splitlines(), told.err


def test_audit_tells_every_map_and_the_verdict_and_changes_nothing(pipeline, capsys):
    pipeline.recipe["pack"] = [{"container": "ktx2", "pixels": pixels} for pixels in ("rgba16f", "rgb9e5")]
    pipeline.bake()
    before = everything(pipeline.build)
    status, lines, _ = run(capsys, "audit ferry_noon quay_night")
    assert status == ALL_WELL
    assert lines[0] == "ferry_noon, as published: passed"
    maps = [line.split("  ")[0] for line in lines[2:7]]
    assert maps == ["level 0", "level 1", "level 2", "irradiance", "all"]
    assert re.match(r"100 % of \d+ texels within tolerance, rounding and ", lines[7])
    assert lines[8].startswith("specular.rgb9e5.ktx2: 100 % of all texels are those of specular.rgba16f.ktx2")
    assert lines[-1] == "2 of 2 probes passed"
    after = everything(pipeline.build)
    after.pop("work/.lock")
    assert after == before


def test_audit_reads_what_is_published_and_ends_with_3_where_it_is_spoiled(pipeline, capsys, monkeypatch):
    stored = packing.stored_images
    brighter = lambda levels, axes, stops: stored([level * 1.2 for level in levels], axes, stops)  # noqa: E731
    monkeypatch.setattr(packing, "stored_images", brighter)
    write_sky(pipeline.folder / "ferry_noon.exr", seed=5)
    pipeline.bake()
    status, lines, _ = run(capsys, "audit * --texels 48")
    assert status == GATE_BROKEN
    assert lines[0].startswith("ferry_noon, as published: FAILED: ")
    assert lines[-1] == "1 of 2 probes passed"


def test_audit_of_a_held_probe_reads_what_is_packed(pipeline, capsys):
    pipeline.settings["gates"] = {"bytes": {"probe_gpu": "1 KiB"}}
    write_sky(pipeline.folder / "ferry_noon.exr", seed=5)
    pipeline.bake()
    assert run(capsys, "audit ferry_noon")[1][0] == "ferry_noon, as packed, held: passed"


def test_more_texels_and_more_time_look_at_more(pipeline, capsys):
    def texels(options):
        told = run(capsys, f"audit ferry_noon {options}")[1][-1]
        return int(re.search(r"of ([\d,]+) texels", told)[1].replace(",", ""))

    few = texels("--texels 12")
    assert few < texels("--texels 240")
    assert 2 * few < texels("--texels 12 --budget 0.3")


@pytest.mark.parametrize("command", ["audit", "noise --level 1 --samples 8"])
def test_what_is_not_baked_as_asked_is_told(pipeline, capsys, command):
    pipeline.recipe["specular"]["roughness"] = [0, 0.4, 1]
    pipeline.snapshot()
    status, _, told = run(capsys, f"{command} ferry_noon")
    assert status == SOURCE_FAILED
    assert told == "ferry_noon: is not baked as the pipeline file asks for it; skykiln bake ferry_noon\n"


def test_noise_gives_the_level_its_error_and_the_counts(pipeline, capsys):
    status, lines, _ = run(capsys, "noise ferry_noon --level 1 --samples 4096 --technique mis --out sampled")
    assert status == ALL_WELL
    level, error = (
        from_cube_space(read_exr_levels(path.read_bytes(), path.name).levels[0], "negate_x")
        for path in (pipeline.folder / f"sampled/ferry_noon.level_1.4096{end}.exr" for end in ("", ".error"))
    )
    baked = np.load(pipeline.build / "work/ferry_noon/level_1.npy")
    z = (level - baked) / error
    assert np.sqrt(np.mean(z**2)) == pytest.approx(1, abs=0.4)
    assert lines[2].startswith("multiple importance sampling, 4,096 samples a texel: in 95 % of all values ")
    count = r"(over )?[\d,]+"
    three = f"{count} / {count} / {count}"
    wanted = f"GGX sampling {three}; filtered lookups {three}; multiple importance sampling {three}"
    assert re.fullmatch(f"samples a texel for an error of 5, 1, 0.5 %: {wanted}", lines[3])


def test_a_level_without_a_lobe_is_refused(pipeline, capsys):
    status, _, told = run(capsys, "noise ferry_noon --level 7 --samples 8")
    assert (status, told) == (SOURCE_FAILED, "ferry_noon: --level 7: its filtered levels are 1 to 2\n")


@pytest.mark.parametrize("options", ["--samples 3", "--samples 9 --technique mis"])
def test_counts_that_give_no_error_are_refused(pipeline, options):
    with pytest.raises(SystemExit):
        main(f"noise ferry_noon --level 1 {options}".split())
