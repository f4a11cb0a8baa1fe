"""The listings for Vulkan and the shader for Direct3D of docs/for_renderers.md, run by Mesa's lavapipe on
files that were baked.

Needs gcc, Debian's libvulkan-dev, mesa-vulkan-drivers and glslang-tools.
"""

import os
import re
import subprocess
from pathlib import Path

import numpy as np
import pytest
from packed_probe import (
    CODING_ERRORS,
    CODINGS,
    HARMONICS,
    SHADING,
    expected_values,
    listing,
    plain_files,
    surfaces,
    uniforms_of,
)

from skykiln.light.cube_axes import CUBE_AXES

HARNESS = Path(__file__).with_name("vulkan_listing.c")
MAIN = """
layout(local_size_x = 64) in;
layout(std430, set = 0, binding = 4) buffer A { vec4 a_of[]; };
layout(std430, set = 0, binding = 5) buffer B { vec4 b_of[]; };
layout(std430, set = 0, binding = 6) buffer Values { vec4 values[]; };
void main() {
    uint i = gl_GlobalInvocationID.x;
    if (i >= a_of.length()) return;
    vec4 a = a_of[i], b = b_of[i];
    values[i] = vec4(%s, 0.0);
}
"""


@pytest.fixture(scope="module")
def harness(tmp_path_factory):
    """The program that was compiled with the page's listing in its place."""
    folder = tmp_path_factory.mktemp("vulkan")
    (folder / "listing.c").write_text(listing("c"))
    program = folder / "vulkan_listing"
    command = ["gcc", "-std=c11", "-Wall", "-Werror", f"-I{folder}", HARNESS, "-o", program, "-lvulkan"]
    subprocess.run(command, check=True)
    return program


def vulkan_shader(expression):
    """The page's shader with what the page says that Vulkan asks for: a set, and a block of uniforms."""
    source = re.sub(r"layout\(binding", "layout(set = 0, binding", listing("glsl"))
    plain = re.findall(r"^uniform ((?:vec3|float|int) [^;]*;)", source, re.MULTILINE)
    source = re.sub(r"^uniform (?:vec3|float|int) .*\n", "", source, flags=re.MULTILINE)
    block = f"layout(std140, set = 0, binding = 3) uniform Probe {{ {' '.join(plain)} }};\n"
    return f"#version 430\n{block}{source}{MAIN % expression}"


def uniform_block(uniforms):
    """The bytes by the rules of std140: arrays in steps of 16 bytes."""
    roughness = np.zeros((16, 4), np.float32)
    roughness[: uniforms["level_count"], 0] = uniforms["roughness_of"]
    head = np.float32([*uniforms["signs"], uniforms["true_scale"]]).tobytes()
    count = np.int32([uniforms["level_count"], 0, 0, 0]).tobytes()
    sh = np.zeros((9, 4), np.float32)
    sh[:, :3] = uniforms["sh"]
    return head + count + roughness.tobytes() + sh.tobytes()


def run_for_each(harness, language, source, a, b, files, uniforms, folder):
    """What a shader makes of `a` (k, 3) and `b` (k, 4), row by row: (k, 3)."""
    (folder / "shader").write_text(source)
    reads = {"glsl": [], "hlsl": ["-D", "-e", "main"]}[language]
    command = ["glslangValidator", "-V", "-S", "comp", *reads, "-o", "shader.spv", "shader"]
    subprocess.run(command, cwd=folder, check=True)
    (folder / "uniforms").write_bytes(uniform_block(uniforms))
    (folder / "a").write_bytes(np.float32(np.c_[a, np.zeros(len(a))]).tobytes())
    (folder / "b").write_bytes(np.float32(b).tobytes())
    (driver,) = Path("/usr/share/vulkan/icd.d").glob("lvp_icd.*json")
    drivers = {"VK_ICD_FILENAMES": str(driver), "VK_DRIVER_FILES": str(driver)}
    command = [harness, "shader.spv", *files, "uniforms", "a", "b", "values"]
    subprocess.run(command, cwd=folder, env={**os.environ, **drivers}, check=True)
    return np.frombuffer((folder / "values").read_bytes(), np.float32).reshape(-1, 4)[:, :3]


@pytest.mark.parametrize(
    ("pixels", "axes"), [("rgba16f", axes) for axes in CUBE_AXES] + [(p, "negate_x") for p in CODINGS[1:]]
)
def test_listing_for_vulkan_shades_as_computed_here(harness, probe, pixels, axes, tmp_path):
    n, sight = surfaces()
    uniforms = uniforms_of(probe.probe_record("ferry_noon"), axes)
    shading, harmonics = expected_values(probe, n, sight)
    given = n, sight, plain_files(probe, pixels, axes), uniforms, tmp_path
    seen = run_for_each(harness, "glsl", vulkan_shader(SHADING), *given)
    np.testing.assert_allclose(seen, shading, rtol=3e-3 + CODING_ERRORS[pixels])
    seen = run_for_each(harness, "glsl", vulkan_shader(HARMONICS), *given)
    np.testing.assert_allclose(seen, harmonics, rtol=1e-4)


# The page's HLSL in a compute shader: places for what it declares, and the level_of of the GLSL, HLSL too.
HLSL = """
[[vk::binding(3)]] cbuffer Probe {{
    float3 signs; float true_scale; int level_count; float roughness_of[16];
}};
{level_of}
{listing}
[[vk::binding(4)]] StructuredBuffer<float4> a_of;
[[vk::binding(5)]] StructuredBuffer<float4> b_of;
[[vk::binding(6)]] RWStructuredBuffer<float4> values;
[numthreads(64, 1, 1)]
void main(uint3 at : SV_DispatchThreadID) {{
    uint count, stride;
    a_of.GetDimensions(count, stride);
    if (at.x >= count) return;
    float4 a = a_of[at.x], b = b_of[at.x];
    values[at.x] = float4({expression}, 0);
}}
"""
DECLARED = """TextureCube specular_map, irradiance_map;
Texture2D brdf_map;
SamplerState linear_clamp;
"""
PLACED = """[[vk::binding(0)]] TextureCube specular_map;
[[vk::binding(1)]] TextureCube irradiance_map;
[[vk::binding(2)]] Texture2D brdf_map;
[[vk::binding(0)]] SamplerState linear_clamp;
"""


def direct3d_shader(expression):
    assert DECLARED in listing("hlsl")
    (level_of,) = re.findall(r"^float level_of.*?^}", listing("glsl"), re.MULTILINE | re.DOTALL)
    placed = listing("hlsl").replace(DECLARED, PLACED)
    return HLSL.format(level_of=level_of, listing=placed, expression=expression.replace("vec3", "float3"))


@pytest.mark.parametrize("axes", CUBE_AXES)
def test_shader_for_direct3d_shades_as_computed_here(harness, probe, axes, tmp_path):
    n, sight = surfaces()
    uniforms = uniforms_of(probe.probe_record("ferry_noon"), axes)
    given = n, sight, plain_files(probe, "rgba16f", axes), uniforms, tmp_path
    seen = run_for_each(harness, "hlsl", direct3d_shader(SHADING), *given)
    shading, _ = expected_values(probe, n, sight)
    np.testing.assert_allclose(seen, shading, rtol=3e-3)
