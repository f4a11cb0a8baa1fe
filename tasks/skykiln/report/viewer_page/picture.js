'use strict';
// The picture: radiance into a target that can be read back, then from there to the screen.

const CORNERS = '#version 300 es\nvoid main() { vec2 c = vec2(gl_VertexID & 1, gl_VertexID >> 1);'
  + ' gl_Position = vec4(4.0 * c - 1.0, 0.0, 1.0); }';  // one triangle that covers all
const [SPECULAR, IRRADIANCE, BRDF, RADIANCE] = [0, 1, 2, 3];  // texture units
const SKY_FIELD_OF_VIEW = 75 * Math.PI / 180;

class Picture {
  // files: {specular, irradiance, brdf} of readKtx2
  constructor(canvas, files, facts) {
    const gl = canvas.getContext('webgl2', { alpha: false, antialias: false });
    if (!gl) throw new Error('this browser shows no WebGL2, which draws the picture');
    Object.assign(this, { canvas, gl, files, facts });
    uploadTexture(gl, files.specular, SPECULAR);
    uploadTexture(gl, files.irradiance, IRRADIANCE);
    uploadTexture(gl, files.brdf, BRDF);
    this.radiance = program(gl, 'radiance', { SHAPES: facts.scene.shapes.length });
    this.display = program(gl, 'display', { RAMP: facts.ramp.length });
    this.target = gl.createFramebuffer();
    this.setLight();
    this.setScene();
    this.setDisplay();
  }

  setLight() {
    const { gl, radiance: { at, linked }, files: { specular, irradiance } } = this;
    gl.useProgram(linked);
    gl.uniform1i(at.specular_map, SPECULAR);
    gl.uniform1i(at.irradiance_map, IRRADIANCE);
    gl.uniform1i(at.brdf_map, BRDF);
    gl.uniform3fv(at.specular_signs, CUBE_SIGNS[specular.about.cube_axes]);
    gl.uniform3fv(at.irradiance_signs, CUBE_SIGNS[irradiance.about.cube_axes]);
    gl.uniform1f(at.true_scale, 2 ** specular.about.storage_ev);
    gl.uniform1i(at.level_count, specular.levels.length);
    gl.uniform1fv(at['roughness_of[0]'], specular.about.roughness);
  }

  setScene() {
    const { gl, radiance: { at }, facts: { scene: { shapes } } } = this;
    const all = (key) => shapes.flatMap((shape) => shape[key]);
    gl.uniform4fv(at['shape_start[0]'], shapes.flatMap((shape) => [...shape.start, shape.radius]));
    gl.uniform3fv(at['shape_end[0]'], all('end'));
    gl.uniform3fv(at['shape_albedo[0]'], all('albedo'));
    gl.uniform3fv(at['shape_f0[0]'], all('f0'));
    gl.uniform2fv(at['shape_roughness[0]'], all('roughness'));
  }

  setDisplay() {
    const { gl, facts, display: { at, linked } } = this;
    gl.useProgram(linked);
    gl.uniform1i(at.radiance_bits, RADIANCE);
    gl.uniformMatrix3fv(at.to_rec709, true, facts.to_rec709.flat());
    gl.uniform3fv(at.luminance_weights, facts.luminance_weights);
    gl.uniform3fv(at['ramp[0]'], facts.ramp.flat());
    gl.uniform1f(at.stops, facts.stops);
    gl.uniform1f(at.middle_grey, facts.middle_grey);
  }

  resize(width, height) {
    const { canvas, gl } = this;
    if (this.bits && canvas.width === width && canvas.height === height) return;
    Object.assign(canvas, { width, height });
    gl.deleteTexture(this.bits || null);
    this.bits = gl.createTexture();
    gl.activeTexture(gl.TEXTURE0 + RADIANCE);
    gl.bindTexture(gl.TEXTURE_2D, this.bits);
    gl.texStorage2D(gl.TEXTURE_2D, 1, gl.RGBA32UI, width, height);
    gl.texParameteri(gl.TEXTURE_2D, gl.TEXTURE_MIN_FILTER, gl.NEAREST);
    gl.texParameteri(gl.TEXTURE_2D, gl.TEXTURE_MAG_FILTER, gl.NEAREST);
    gl.bindFramebuffer(gl.FRAMEBUFFER, this.target);
    gl.framebufferTexture2D(gl.FRAMEBUFFER, gl.COLOR_ATTACHMENT0, gl.TEXTURE_2D, this.bits, 0);
  }

  // view: {scene, level, exposure, yaw, pitch (radians), falseColour}
  draw(view) {
    const { gl, canvas } = this;
    gl.viewport(0, 0, canvas.width, canvas.height);
    gl.bindFramebuffer(gl.FRAMEBUFFER, this.target);
    gl.useProgram(this.radiance.linked);
    this.setView(view);
    gl.drawArrays(gl.TRIANGLES, 0, 3);
    gl.bindFramebuffer(gl.FRAMEBUFFER, null);
    gl.useProgram(this.display.linked);
    gl.uniform1f(this.display.at.exposure, view.exposure);
    gl.uniform1i(this.display.at.in_false_colours, view.falseColour ? 1 : 0);
    gl.drawArrays(gl.TRIANGLES, 0, 3);
  }

  setView(view) {
    const { gl, canvas, radiance: { at }, facts: { scene, first_level: first } } = this;
    const { ahead, right, up } = viewAxes(view);
    gl.uniform2f(at.picture_size, canvas.width, canvas.height);
    gl.uniform3fv(at.ahead, ahead);
    gl.uniform3fv(at.right, right);
    gl.uniform3fv(at.up, up);
    gl.uniform3fv(at.eye, scene.target.map((c, i) => c - scene.distance * ahead[i]));
    gl.uniform1f(at.reach, Math.tan(fieldOfView(view, scene) / 2));
    gl.uniform1f(at.sky_level, view.level - first);
    gl.uniform1i(at.with_scene, view.scene ? 1 : 0);
  }

  // Linear radiance of pixels, bottom row first: [r, g, b, bits of the shape's number] each.
  read(x, y, width, height) {
    const { gl } = this;
    const bits = new Uint32Array(4 * width * height);
    gl.bindFramebuffer(gl.FRAMEBUFFER, this.target);
    gl.readPixels(x, y, width, height, gl.RGBA_INTEGER, gl.UNSIGNED_INT, bits);
    return { values: new Float32Array(bits.buffer), shape: bits[3] - 1 };
  }

  // The world direction looked along at a place of the picture, 0..1 from its upper left corner.
  direction(view, x, y) {
    const { ahead, right, up } = viewAxes(view);
    const reach = Math.tan(fieldOfView(view, this.facts.scene) / 2);
    const across = (2 * x - 1) * reach * this.canvas.width / this.canvas.height;
    const above = (1 - 2 * y) * reach;
    const ray = ahead.map((c, i) => c + across * right[i] + above * up[i]);
    return ray.map((c) => c / Math.hypot(...ray));
  }
}

function fieldOfView(view, scene) {
  return view.scene ? scene.field_of_view : SKY_FIELD_OF_VIEW;
}

// Yaw 0 looks along +z, +90 degrees along +x, which lies left of it.
function viewAxes({ yaw, pitch }) {
  const [sin, cos, high, level] = [Math.sin(yaw), Math.cos(yaw), Math.sin(pitch), Math.cos(pitch)];
  return {
    ahead: [sin * level, high, cos * level],
    right: [-cos, 0, sin],
    up: [-sin * high, level, -cos * high],
  };
}

// A program of the page's shader, in use, and the places of its uniforms.
function program(gl, name, numbers) {
  const defines = Object.entries(numbers).map(([key, number]) => `#define ${key} ${number}\n`).join('');
  const source = document.getElementById(name).textContent.replace(/^(#version.*\n)/, `$1${defines}`);
  const linked = gl.createProgram();
  for (const [kind, text] of [[gl.VERTEX_SHADER, CORNERS], [gl.FRAGMENT_SHADER, source]]) {
    const shader = gl.createShader(kind);
    gl.shaderSource(shader, text);
    gl.compileShader(shader);
    gl.attachShader(linked, shader);
  }
  gl.linkProgram(linked);
  if (!gl.getProgramParameter(linked, gl.LINK_STATUS)) {
    const logs = gl.getAttachedShaders(linked).map((shader) => gl.getShaderInfoLog(shader)).join(' ');
    throw new Error(`the shader ${name} does not compile here: ${logs}`);
  }
  gl.useProgram(linked);
  const at = {};
  for (let i = 0; i < gl.getProgramParameter(linked, gl.ACTIVE_UNIFORMS); i += 1) {
    const { name: uniform } = gl.getActiveUniform(linked, i);
    at[uniform] = gl.getUniformLocation(linked, uniform);
  }
  return { linked, at };
}
