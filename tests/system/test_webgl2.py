"""The listings for WebGL2 of docs/for_renderers.md, run in Chromium on files that were baked."""

import base64
import json
import re

import numpy as np
import pytest
from chromium import Chromium
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

# What the page says makes GLSL ES 3.00 of its shader.
HEAD = "precision highp float;\nprecision highp samplerCube;\nprecision highp sampler2D;\n"
# One pixel per surface; its value leaves as the bits of float32.
MAIN = """
precision highp int;
uniform sampler2D a_of, b_of;
out uvec4 bits;
void main() {
    vec4 a = texelFetch(a_of, ivec2(gl_FragCoord.xy), 0), b = texelFetch(b_of, ivec2(gl_FragCoord.xy), 0);
    bits = uvec4(floatBitsToUint(%s), 0u);
}
"""
RUN = """
function values(gl, source, a, b, textures, uniforms) {
  const count = a.length / 4, program = gl.createProgram();
  const corners = '#version 300 es\\nvoid main() {'
    + ' gl_Position = vec4(4.0 * vec2(gl_VertexID & 1, gl_VertexID >> 1) - 1.0, 0.0, 1.0); }';
  for (const [kind, text] of [[gl.VERTEX_SHADER, corners], [gl.FRAGMENT_SHADER, source]]) {
    const shader = gl.createShader(kind);
    gl.shaderSource(shader, text);
    gl.compileShader(shader);
    if (!gl.getShaderParameter(shader, gl.COMPILE_STATUS)) throw new Error(gl.getShaderInfoLog(shader));
    gl.attachShader(program, shader);
  }
  gl.linkProgram(program);
  gl.useProgram(program);
  const place = (name) => gl.getUniformLocation(program, name);
  Object.entries(textures).forEach(([name, texture], unit) => {
    gl.activeTexture(gl.TEXTURE0 + unit);
    gl.bindTexture(name === 'brdf_map' ? gl.TEXTURE_2D : gl.TEXTURE_CUBE_MAP, texture);
    gl.uniform1i(place(name), unit);
  });
  [['a_of', a], ['b_of', b]].forEach(([name, data], i) => {
    gl.activeTexture(gl.TEXTURE8 + i);
    gl.bindTexture(gl.TEXTURE_2D, gl.createTexture());
    gl.texImage2D(gl.TEXTURE_2D, 0, gl.RGBA32F, count, 1, 0, gl.RGBA, gl.FLOAT, new Float32Array(data));
    gl.texParameteri(gl.TEXTURE_2D, gl.TEXTURE_MIN_FILTER, gl.NEAREST);
    gl.texParameteri(gl.TEXTURE_2D, gl.TEXTURE_MAG_FILTER, gl.NEAREST);
    gl.uniform1i(place(name), 8 + i);
  });
  gl.uniform3fv(place('signs'), uniforms.signs);
  gl.uniform1f(place('true_scale'), uniforms.true_scale);
  gl.uniform1i(place('level_count'), uniforms.level_count);
  gl.uniform1fv(place('roughness_of'), uniforms.roughness_of);
  gl.uniform3fv(place('sh'), uniforms.sh.flat());
  const target = gl.createTexture();
  gl.activeTexture(gl.TEXTURE15);
  gl.bindTexture(gl.TEXTURE_2D, target);
  gl.texStorage2D(gl.TEXTURE_2D, 1, gl.RGBA32UI, count, 1);
  gl.bindFramebuffer(gl.FRAMEBUFFER, gl.createFramebuffer());
  gl.framebufferTexture2D(gl.FRAMEBUFFER, gl.COLOR_ATTACHMENT0, gl.TEXTURE_2D, target, 0);
  gl.viewport(0, 0, count, 1);
  gl.drawArrays(gl.TRIANGLES, 0, 3);
  const bits = new Uint32Array(4 * count);
  gl.readPixels(0, 0, count, 1, gl.RGBA_INTEGER, gl.UNSIGNED_INT, bits);
  if (gl.getError()) throw new Error('an error of WebGL');
  return Array.from(bits);
}
const gl = document.createElement('canvas').getContext('webgl2');
const bytes = (text) => Uint8Array.from(atob(text), (c) => c.charCodeAt(0)).buffer;
"""


@pytest.fixture(scope="module")
def browser(tmp_path_factory):
    folder = tmp_path_factory.mktemp("webgl2")
    page = folder / "page.html"
    page.write_text(f"<!doctype html><script>{listing('js')}</script><script>{RUN}</script>")
    with Chromium(folder / "profile") as browser:
        browser.open(page)
        yield browser


def run_for_each(browser, expressions, a, b, files, uniforms):
    """Values of GLSL expressions of `a` (k, 3) and `b` (k, 4), for every row: (expressions, k, 3)."""
    names = ("specular_map", "irradiance_map", "brdf_map")
    loads = ", ".join(
        f"{name}: loadTexture(gl, bytes('{base64.b64encode(file.read_bytes()).decode()}'))"
        for name, file in zip(names, files, strict=True)
    )
    browser.value(f"globalThis.textures = {{{loads}}}, 0")
    rows = [np.float32(np.c_[a, np.zeros(len(a))]).ravel().tolist(), np.float32(b).ravel().tolist()]
    found = []
    for expression in expressions:
        shader = re.sub(r"layout\(binding = \d\) ", "", listing("glsl"))
        source = f"#version 300 es\n{HEAD}{shader}{MAIN % expression}"
        given = ", ".join(json.dumps(value) for value in (source, *rows))
        words = browser.value(f"values(gl, {given}, textures, {json.dumps(uniforms)})")
        bits = np.array(words, np.uint32).reshape(-1, 4)[:, :3]
        found.append(np.ascontiguousarray(bits).view(np.float32))
    return np.stack(found)


@pytest.mark.parametrize(
    ("pixels", "axes"), [("rgba16f", axes) for axes in CUBE_AXES] + [(p, "negate_x") for p in CODINGS[1:]]
)
def test_listing_for_webgl2_shades_as_computed_here(browser, probe, pixels, axes):
    record = probe.probe_record("ferry_noon")
    n, sight = surfaces()
    files = plain_files(probe, pixels, axes)
    seen = run_for_each(browser, [SHADING, HARMONICS], n, sight, files, uniforms_of(record, axes))
    shading, harmonics = expected_values(probe, n, sight)
    np.testing.assert_allclose(seen[0], shading, rtol=3e-3 + CODING_ERRORS[pixels])
    np.testing.assert_allclose(seen[1], harmonics, rtol=1e-4)
