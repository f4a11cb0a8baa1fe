"""The audit passes what is right and catches what is wrong; long counts with --long."""

import functools
import math

import numpy as np
import pytest
from panorama_reference import SKIES, coloured_linear, filtered_exactly, pixel_points, small_sun
from planted_faults import (
    FAULTS,
    HEIGHT,
    SEEN,
    correct_charts,
    faulty_charts,
    in_half_floats,
)

from skykiln.light import audit
from skykiln.light.audit import Chart, audit_charts, judge, look, scores, together
from skykiln.light.directions import cube_directions
from skykiln.light.faces import extract_faces
from skykiln.light.pyramid import build_pyramid
from skykiln.light.sheen import sheen_kernel
from skykiln.light.specular import filter_level


@functools.cache
def wrong(sky, fault):
    return in_half_floats(faulty_charts(sky, fault))


def caught(sky, fault, trials):
    panorama, charts = SKIES[sky](HEIGHT), wrong(sky, fault)
    verdicts = [audit_charts(panorama, charts, seed)[0] for seed in range(trials)]
    return sum(not verdict.passed for verdict in verdicts)


def z_scores_and_alarms(sky, audits):
    panorama, charts = SKIES[sky](HEIGHT), correct_charts(sky)
    z, alarms = [], 0
    for seed in range(audits):
        verdict, findings = audit_charts(panorama, charts, seed)
        z.append(np.abs(scores(findings)).ravel())
        alarms += not verdict.passed
    return np.concatenate(z), alarms


def assert_tail_is_within_the_model(z):
    """Hoeffding's bound: at most 2 exp(-x^2/2) of all scores beyond x, up to the chance of a count."""
    for x in (1.5, 2.0, 2.5, 3.0, 4.0):
        expected = 2 * math.exp(-x * x / 2) * z.size
        assert (z > x).sum() <= expected + 4 * math.sqrt(expected)


@pytest.mark.parametrize("sky", SKIES)
def test_correct_maps_pass_and_their_scores_keep_to_the_model(sky):
    z, alarms = z_scores_and_alarms(sky, 10)
    assert alarms == 0
    assert_tail_is_within_the_model(z)
    assert 0.1 < np.sqrt(np.mean(z**2)) < 1.0


@pytest.mark.long
@pytest.mark.parametrize("sky", SKIES)
def test_a_thousand_audits_of_correct_maps_raise_no_alarm(sky):
    z, alarms = z_scores_and_alarms(sky, 1000)
    assert alarms == 0
    assert_tail_is_within_the_model(z)


@pytest.mark.parametrize("fault", FAULTS)
def test_every_planted_fault_is_caught(fault):
    skies = [sky for sky, seen in SEEN if seen == fault]
    sky = skies[list(FAULTS).index(fault) % len(skies)]
    assert caught(sky, fault, 2) == 2


@pytest.mark.long
@pytest.mark.parametrize(("sky", "fault"), SEEN)
def test_every_planted_fault_is_caught_in_three_hundred_trials(sky, fault):
    assert caught(sky, fault, 300) == 300


def test_the_production_filter_passes():
    panorama = coloured_linear(128)
    faces = extract_faces(panorama, 32)
    pyramid = build_pyramid(panorama)
    charts = [Chart("level 0", faces, 0.0, 0.005)]
    charts += [Chart(f"{a}", filter_level(pyramid, 8, a, 0.005), a, 0.005) for a in (0.1, 0.4, 1.0)]
    verdict, _ = audit_charts(panorama, charts, 3)
    assert verdict.passed
    assert verdict.share_passed == 1.0


def test_a_sheen_map_is_held_against_the_sheen_lobe():
    panorama, normals = coloured_linear(32), cube_directions(2)
    points, weights = pixel_points(32, 64, 6)
    radiance = np.repeat(np.repeat(panorama, 6, 0), 6, 1).reshape(-1, 3)
    kernel = sheen_kernel(normals.reshape(-1, 3) @ points.T, 0.3) * weights
    exact = (kernel @ radiance / kernel.sum(axis=1, keepdims=True)).reshape(normals.shape)
    assert audit_charts(panorama, [Chart("sheen", exact, 0.3, 0.005, "sheen")], 1)[0].passed
    assert not audit_charts(panorama, [Chart("sheen", exact, 0.3, 0.005, "ggx")], 1)[0].passed


def test_estimates_agree_with_plain_summation():
    panorama = small_sun(32)
    normals = cube_directions(2).reshape(-1, 3)
    exact = filtered_exactly(panorama, normals, 0.3, order=8).reshape(6, 2, 2, 3)
    _, findings = audit_charts(panorama, [Chart("only", exact, 0.3, 0.005)], 5)
    z = scores(findings)
    assert np.abs(z).max() < 3.5
    assert np.abs(findings.baked / findings.estimates - 1).max() < 0.02


def test_level_0_is_held_against_the_interpolated_panorama_where_pixels_are_wide():
    panorama = SKIES["lamps"](32)
    for size in (4, 64):
        charts = [Chart("level 0", extract_faces(panorama, size), 0.0, 0.005)]
        verdict, _ = audit_charts(panorama, charts, 2)
        assert verdict.passed


def test_yaw_turns_the_maps_against_the_panorama():
    panorama = coloured_linear(64)
    charts = [Chart("level 0", extract_faces(panorama, 16, yaw=0.4), 0.0, 0.005)]
    assert audit_charts(panorama, charts, 1, yaw=0.4)[0].passed
    assert not audit_charts(panorama, charts, 1, yaw=-0.4)[0].passed


def test_the_same_seed_gives_the_same_verdict():
    panorama, charts = SKIES["linear"](HEIGHT), correct_charts("linear")
    first, second = (audit_charts(panorama, charts, 2**100 + 7) for _ in range(2))
    assert first[0] == second[0]
    np.testing.assert_array_equal(first[1].estimates, second[1].estimates)
    assert audit_charts(panorama, charts, 8)[0].worst != first[0].worst


@pytest.mark.parametrize("value", [np.nan, np.inf, -np.inf])
def test_a_value_that_is_not_finite_fails(value):
    panorama = np.ones((8, 16, 3), dtype=np.float32)
    faces = np.ones((6, 1, 1, 3), dtype=np.float32)
    assert audit_charts(panorama, [Chart("all", faces, 0.5, 0.01)], 1)[0].passed
    faces[2, 0, 0, 1] = value
    verdict, _ = audit_charts(panorama, [Chart("all", faces, 0.5, 0.01)], 1)
    assert not verdict.passed
    assert verdict.worst["face"] == 2 and verdict.worst["channel"] == 1
    assert verdict.share_passed == pytest.approx(5 / 6)


def test_black_skies_pass_when_they_are_black():
    panorama = np.zeros((8, 16, 3), dtype=np.float32)
    faces = np.zeros((6, 2, 2, 3), dtype=np.float32)
    charts = [Chart("a", faces, 0.0, 0.01), Chart("b", faces, 0.5, 0.01)]
    assert audit_charts(panorama, charts, 1)[0].passed
    assert not audit_charts(panorama, [charts[1]._replace(faces=faces + 1e-3)], 1)[0].passed


def test_rounding_of_a_coarse_coding_is_allowed_for():
    panorama = np.ones((16, 32, 3), dtype=np.float32)
    faces = np.full((6, 4, 4, 3), 1.03, dtype=np.float32)
    charts = [Chart("level 0", faces, 0.0, 0.005)]
    assert not audit_charts(panorama, charts, 1)[0].passed
    rounding = np.full(faces.shape, 0.03, dtype=np.float32)
    assert audit_charts(panorama, [charts[0]._replace(rounding=rounding)], 1)[0].passed
    rounding[2] = 0  # the allowance is each texel's own
    assert not audit_charts(panorama, [charts[0]._replace(rounding=rounding)], 1)[0].passed


def test_verdict_names_the_texel_and_tells_its_score():
    panorama = coloured_linear(64)
    faces = extract_faces(panorama, 8)
    faces[4] *= 1.5
    charts = [Chart("level 0", faces, 0.0, 0.005)]
    verdict, _ = audit_charts(panorama, charts, 4)
    assert verdict.worst["chart"] == "level 0" and verdict.worst["face"] == 4
    assert verdict.worst["deviation"] == pytest.approx(0.5, abs=0.01)
    assert verdict.worst["z"] > verdict.limit > 5
    assert verdict.worst["used"] > 1
    assert [row["chart"] for row in verdict.charts] == ["level 0", "all"]
    assert verdict.charts[0]["worst"] == verdict.worst
    assert verdict.samples > 0 and verdict.texels >= 12


def test_less_precision_costs_fewer_samples():
    panorama, charts = SKIES["linear"](HEIGHT), correct_charts("linear")
    usual = audit_charts(panorama, charts, 1)[0]
    rough = audit_charts(panorama, charts, 1, per_face=1, precision=2.0)[0]
    assert rough.passed
    assert rough.samples < 0.4 * usual.samples


def test_several_looks_are_judged_as_one():
    panorama, charts = SKIES["linear"](HEIGHT), correct_charts("linear")
    looks = [look(panorama, charts, seed) for seed in (1, 2)]
    verdict = judge(charts, together(looks))
    assert verdict.passed
    assert verdict.texels == sum(len(findings.baked) for findings in looks)
    assert verdict.limit > judge(charts, looks[0]).limit
    assert [row["texels"] for row in verdict.charts[:-1]] == [
        sum((findings.texels.chart == k).sum() for findings in looks) for k in range(len(charts))
    ]


def test_a_night_of_a_thousand_probes_raises_a_false_alarm_once_in_a_hundred():
    assert audit.FALSE_ALARM * 1000 <= 0.01
