"""The GGX filter: its promise on hard skies, limits, published values, another library's numbers."""

import ducc0
import numba
import numpy as np
import pytest
from reference import filtered, joined, panorama_points, relative_errors
from scipy import integrate, special

from skykiln.light.directions import (
    alpha_from_roughness,
    cube_directions,
    cube_texel_solid_angles,
    panorama_directions,
    panorama_row_solid_angles,
)
from skykiln.light.ggx import ggx_kernel, ggx_norm
from skykiln.light.irradiance import irradiance_cube
from skykiln.light.pyramid import build_pyramid
from skykiln.light.specular import filter_level

WIDTH = 128


def sky(name, width=WIDTH):
    rng = np.random.default_rng(7)
    shape = (width // 2, width)
    panorama = np.ones((*shape, 3), np.float32)
    d = panorama_directions(width, width // 2)
    if name.startswith("sun"):
        row = {"sun": width // 8, "sun at a pole": 0, "sun on the horizon": width // 4}[name]
        panorama[row, width // 3] = [5e4, 4e4, 3e4]
    elif name == "linear":
        panorama = 1 + 0.8 * d
    elif name == "half space":
        panorama = (d[..., 1:2] > 0) * np.ones(3)
    elif name == "checkerboard":
        panorama[::2, ::2] = panorama[1::2, 1::2] = 0
    elif name == "coloured lamps":
        panorama[:] = 0
        panorama[tuple(rng.integers(0, shape, (300, 2)).T)] = rng.random((300, 3)) ** 4
    elif name == "one lit pixel":
        panorama[:] = 0
        panorama[width // 6, width // 5] = 1
    return panorama.astype(np.float32)


SKIES = ["constant", "linear", "sun", "sun at a pole", "sun on the horizon", "half space",
         "checkerboard", "coloured lamps", "one lit pixel"]  # fmt: skip


@pytest.mark.parametrize("name", SKIES)
@pytest.mark.parametrize("roughness", [0.2, 0.45, 0.8, 1.0])
def test_largest_error_stays_below_the_tolerance(name, roughness):
    panorama, alpha = sky(name), alpha_from_roughness(roughness)
    size, every = 16, 1 if name.startswith(("one", "sun")) else 5
    normals = cube_directions(size).reshape(-1, 3)[::every]
    bright = np.where(panorama.max(-1, keepdims=True) > 0.9 * panorama.max(), panorama, 0)
    if name.startswith(("one", "sun")):  # the horizon cuts the one bright pixel: look closely
        points = joined(panorama_points(panorama - bright, 1), panorama_points(bright, 48, 2))
    else:
        points = panorama_points(panorama, 2 if name == "coloured lamps" else 1)
    reference = filtered(points, normals, alpha)
    tree = build_pyramid(panorama)
    for tolerance in (0.05, 0.005, 0.001):
        result = filter_level(tree, size, alpha, tolerance).reshape(-1, 3)[::every]
        assert relative_errors(result, reference, panorama).max() < tolerance
        assert result.min() >= 0.0


@pytest.mark.parametrize("roughness", [0.03, 0.143])
def test_lobes_narrower_than_a_pixel_cut_the_pixels(roughness):
    panorama, alpha, size = sky("sun", 64), alpha_from_roughness(roughness), 32
    d = panorama_directions(64, 32)
    sun = d[np.unravel_index(panorama[..., 0].argmax(), d.shape[:2])]
    texels = np.argsort(-cube_directions(size).reshape(-1, 3) @ sun)[:25]
    near = np.where(d @ sun > np.cos(0.35), 1, 0)[..., None] * panorama
    fine = panorama_points(near.astype(np.float32), int(0.06 / alpha) + 1, 4)
    points = joined(panorama_points((panorama - near).astype(np.float32), 2), fine)
    reference = filtered(points, cube_directions(size).reshape(-1, 3)[texels], alpha)
    result = filter_level(build_pyramid(panorama), size, alpha, 0.005).reshape(-1, 3)[texels]
    np.testing.assert_allclose(result, reference, rtol=0.005)


@pytest.mark.parametrize("levels", [(512, 8), (16, 5)])
def test_constant_sky_stays_constant(levels):
    size, count = levels
    tree = build_pyramid(np.ones((2 * size, 4 * size, 3), np.float32))
    for k in range(1, count):
        result = filter_level(tree, size >> k, alpha_from_roughness(k / (count - 1)), 0.005)
        assert np.abs(result - 1).max() < 0.005 / 10


def test_sky_that_is_constant_but_for_one_black_pixel_keeps_the_tolerance():
    panorama = np.ones((256, 512, 3), np.float32)
    panorama[10, 20] = 0  # and so nothing is common to all pixels
    for roughness in (0.2, 0.5, 1.0):
        result = filter_level(build_pyramid(panorama), 32, alpha_from_roughness(roughness), 0.005)
        assert np.abs(result - 1).max() < 0.005


def test_black_sky_stays_black():
    result = filter_level(build_pyramid(np.zeros((16, 32, 3), np.float32)), 4, 0.25, 0.01)
    assert not result.any()


def test_same_bits_for_every_number_of_threads():
    tree = build_pyramid(sky("coloured lamps"))
    before = numba.get_num_threads()
    results = []
    for threads in {1, before}:
        numba.set_num_threads(threads)
        results.append(filter_level(tree, 16, 0.1, 0.005).tobytes())
    numba.set_num_threads(before)
    assert len(set(results)) == 1


@pytest.mark.parametrize(
    ("roughness", "eigenvalue"),
    [(0.2, 0.9876473765687528), (0.5, 0.8673956628118448), (0.8, 0.7254941009925487)],
)
def test_linear_sky_is_scaled_by_the_first_eigenvalue(roughness, eigenvalue):
    # Closed form of the stated kernel (Funk-Hecke); Dai and Xu 2013 for the theorem.
    tree = build_pyramid(sky("linear", 512))
    result = filter_level(tree, 32, alpha_from_roughness(roughness), 0.001)
    np.testing.assert_allclose(result, 1 + 0.8 * eigenvalue * cube_directions(32), atol=1e-3)


def test_mean_over_the_sphere_is_kept():
    # lambda_0 = 1 (Funk-Hecke).
    panorama = sky("coloured lamps", 128)
    flux = np.einsum("jic,j->c", panorama.astype(float), panorama_row_solid_angles(128, 64))
    result = filter_level(build_pyramid(panorama), 64, 0.25, 0.001)
    np.testing.assert_allclose(np.einsum("fjic,ji->c", result, cube_texel_solid_angles(64)), flux, rtol=3e-3)


def test_half_space_seen_along_its_edge_is_a_half():
    # Symmetry, at any roughness; at roughness 1 (1 + cos psi)/2 (Lambert).
    tree = build_pyramid(sky("half space", 256))
    for roughness in (0.3, 0.7, 1.0):
        result = filter_level(tree, 64, alpha_from_roughness(roughness), 0.002)
        np.testing.assert_allclose((result[4, 31, 32] + result[4, 32, 32]) / 2, 0.5, rtol=2e-3)
    np.testing.assert_allclose(result[..., 0], (1 + cube_directions(64)[..., 1]) / 2, atol=2e-3)


def test_roughness_one_is_irradiance_over_pi():
    tree = build_pyramid(sky("sun on the horizon"))
    np.testing.assert_array_equal(
        irradiance_cube(tree, 16, 0.005), filter_level(tree, 16, 1.0, 0.005) * np.float32(np.pi)
    )


def test_uniform_upper_sky_lights_a_tilted_plane_as_the_handbooks_say():
    # E = pi L (1 + cos b)/2: Lambert; any illumination handbook.
    e = irradiance_cube(build_pyramid(sky("half space", 256)), 32, 0.001)[..., 0]
    np.testing.assert_allclose(e, np.pi * (1 + cube_directions(32)[..., 1]) / 2, atol=4e-3)


def test_overcast_sky_gives_seven_ninths_of_pi():
    # Moon and Spencer 1942: horizontal 7 pi/9 Lz; vertical to horizontal 0.396177 (closed form).
    d = panorama_directions(256, 128)
    overcast = np.repeat(np.where(d[..., 1:2] > 0, (1 + 2 * d[..., 1:2]) / 3, 0), 3, axis=-1)
    e = irradiance_cube(build_pyramid(overcast.astype(np.float32)), 64, 0.001)[..., 0]
    assert e[2, 31:33, 31:33].mean() == pytest.approx(7 * np.pi / 9, rel=2e-3)
    assert e[4, 31:33, 31:33].mean() == pytest.approx(0.39617708 * 7 * np.pi / 9, rel=3e-3)


@pytest.mark.parametrize("alpha", [0.004, 0.09, 0.49, 0.8, 0.999, 1.0])
def test_normaliser_is_the_integral_of_the_kernel(alpha):
    integral, _ = integrate.quad(
        lambda u: 2 * np.pi * ggx_kernel(1 - np.exp(u), alpha) * np.exp(u), -50, 0, epsabs=0, limit=500
    )
    assert ggx_norm(alpha) == pytest.approx(integral, rel=1e-9)


def test_distribution_is_normalised_over_projected_half_vectors():
    # Walter et al. 2007: the integral of D(h) (h.n) over the hemisphere is 1.
    for alpha in (0.05, 0.3, 1.0):
        def density(cos_h, alpha=alpha):
            c = 2 * cos_h**2 - 1  # c = n.l when h bisects n and l
            d = 4 * alpha**2 / np.pi / ((1 + alpha**2) - c * (1 - alpha**2)) ** 2
            return 2 * np.pi * d * cos_h

        integral, _ = integrate.quad(density, 0, 1, points=[1 - alpha**2], epsabs=1e-12, limit=400)
        assert integral == pytest.approx(1.0, rel=1e-8)


def test_unclamped_kernel_has_the_coefficients_of_heines_formula():
    # 1/(z - c) = sum (2l + 1) Q_l(z) P_l(c) (DLMF 14.28.2); its derivative in z gives 1/(z - c)^2.
    alpha = 0.45
    z = (1 + alpha**2) / (1 - alpha**2)
    q, slope = (a[:9] for a in special.lqn(8, z))
    assert np.all(np.isfinite(q))
    for degree in range(9):
        legendre = special.legendre(degree)
        integral, _ = integrate.quad(
            lambda c, p=legendre: p(c) / ((1 + alpha**2) - c * (1 - alpha**2)) ** 2, -1, 1
        )
        assert integral == pytest.approx(-2 * slope[degree] / (1 - alpha**2) ** 2, rel=1e-9)


def eigenvalues(alpha, degree):
    """Funk-Hecke eigenvalues of the clamped kernel by Gauss-Legendre quadrature."""
    node, weight = np.polynomial.legendre.leggauss(400)
    c, w = 0.5 + 0.5 * node, 0.5 * weight
    kernel = w * c / ((1 + alpha**2) - c * (1 - alpha**2)) ** 2
    p = np.array([special.eval_legendre(l, c) @ kernel for l in range(degree + 1)])
    return p / p[0]


@pytest.mark.parametrize("roughness", [0.3, 0.6])
def test_a_whole_level_equals_a_spherical_harmonic_transform(roughness):
    """Against ducc0, a general-purpose library: synthesis of an exactly band-limited sky and of the same
    with each degree scaled by its eigenvalue."""
    degree, width, alpha = 12, 512, alpha_from_roughness(roughness)
    rng = np.random.default_rng(2)
    count = (degree + 1) * (degree + 2) // 2
    alm = rng.normal(size=count) + 1j * rng.normal(size=count)
    alm[: degree + 1] = alm[: degree + 1].real
    of = np.concatenate([np.arange(m, degree + 1) for m in range(degree + 1)])
    alm /= 1 + of
    alm[0] = 12.0

    def synthesis(a, directions):
        flat = directions.reshape(-1, 3)
        where = np.stack([np.arccos(flat[:, 1]), np.arctan2(flat[:, 0], flat[:, 2]) % (2 * np.pi)], axis=1)
        values = ducc0.sht.experimental.synthesis_general(
            alm=a[None], spin=0, lmax=degree, mmax=degree, loc=where, epsilon=1e-9
        )
        return values.reshape(directions.shape[:-1])

    panorama = np.repeat(synthesis(alm, panorama_directions(width, width // 2))[..., None], 3, axis=-1)
    assert panorama.min() > 0
    result = filter_level(build_pyramid(panorama.astype(np.float32)), 32, alpha, 0.002)
    expected = synthesis(alm * eigenvalues(alpha, degree)[of], cube_directions(32))
    np.testing.assert_allclose(result[..., 1], expected, rtol=2e-3)
