'use strict';
// The page: controls, what the pointer reads, and what is told of the file.

const byId = (id) => document.getElementById(id);
const degrees = (angle) => (angle * 180) / Math.PI;
const radians = (angle) => (angle * Math.PI) / 180;
const PITCH = { sky: [-85, 85, 5], scene: [-80, 10, -14] };  // lowest, highest, at first
const SHARPEST = 1600;  // pixels across: enough for a screen, and for a browser that draws in software

class Page {
  constructor(picture, facts) {
    Object.assign(this, { picture, facts, canvas: picture.canvas, pointer: null });
    const count = picture.files.specular.levels.length;
    byId('level').min = facts.first_level;
    byId('level').max = facts.first_level + count - 1;
    byId('level').value = facts.first_level;
    this.pitches = { sky: PITCH.sky[2], scene: PITCH.scene[2] };
    this.changeView();
    this.listen();
  }

  get sceneShown() {
    return byId('controls').elements.view.value === 'scene';
  }

  get view() {
    const number = (id) => Number(byId(id).value);
    return {
      scene: this.sceneShown,
      level: number('level'),
      exposure: this.facts.exposure * 2 ** number('exposure'),
      yaw: radians(number('yaw')),
      pitch: radians(number('pitch')),
      falseColour: byId('false-colour').checked,
    };
  }

  listen() {
    for (const kind of ['sky', 'scene']) {
      document.querySelector(`input[value=${kind}]`).addEventListener('change', () => this.changeView());
    }
    byId('pitch').addEventListener('input', () => this.keepPitch());
    byId('controls').addEventListener('input', () => this.changed());
    byId('controls').addEventListener('submit', (event) => event.preventDefault());
    new ResizeObserver(() => this.changed()).observe(byId('stage'));
    const { canvas } = this;
    canvas.addEventListener('pointermove', (event) => this.moved(event));
    canvas.addEventListener('pointerleave', () => { this.pointer = null; this.tellValue(); });
    canvas.addEventListener('pointerdown', (event) => canvas.setPointerCapture(event.pointerId));
    canvas.addEventListener('keydown', (event) => this.pressed(event));
  }

  changeView() {
    const kind = this.sceneShown ? 'scene' : 'sky';
    [byId('pitch').min, byId('pitch').max] = PITCH[kind];
    byId('pitch').value = this.pitches[kind];
    this.changed();
  }

  // Each view has a pitch of its own, which it finds again.
  keepPitch() {
    this.pitches[this.sceneShown ? 'scene' : 'sky'] = Number(byId('pitch').value);
  }

  changed() {
    if (this.asked) return;
    this.asked = requestAnimationFrame(() => { this.asked = 0; this.drawNow(); });
  }

  drawNow() {
    const { width, height } = byId('stage').getBoundingClientRect();
    const fine = Math.min(window.devicePixelRatio || 1, SHARPEST / width);
    this.picture.resize(Math.max(1, Math.round(width * fine)), Math.max(1, Math.round(height * fine)));
    this.picture.draw(this.view);
    this.tellControls();
    this.tellScale();
    this.tellValue();
  }

  moved(event) {
    const { left, top, width, height } = this.canvas.getBoundingClientRect();
    const place = { x: (event.clientX - left) / width, y: (event.clientY - top) / height };
    if (event.buttons & 1 && this.pointer) {
      const perWidth = this.sceneShown ? -180 : 110;  // the sky sticks to the pointer, the scene turns with it
      this.turn((place.x - this.pointer.x) * perWidth, (place.y - this.pointer.y) * (this.sceneShown ? -60 : 70));
    }
    const inside = place.x >= 0 && place.x < 1 && place.y >= 0 && place.y < 1;
    this.pointer = inside ? place : null;
    this.tellValue();
  }

  turn(yaw, pitch) {
    const turned = Number(byId('yaw').value) + yaw;
    byId('yaw').value = turned - 360 * Math.round(turned / 360);
    byId('pitch').value = Number(byId('pitch').value) + pitch;
    this.keepPitch();
    this.changed();
  }

  pressed(event) {
    const step = (id, by) => { byId(id).value = Number(byId(id).value) + by; this.changed(); };
    const keys = {
      ArrowLeft: () => this.turn(5, 0),
      ArrowRight: () => this.turn(-5, 0),
      ArrowUp: () => this.turn(0, 5),
      ArrowDown: () => this.turn(0, -5),
      PageUp: () => step('level', 1),
      PageDown: () => step('level', -1),
      '+': () => step('exposure', 0.5),
      '-': () => step('exposure', -0.5),
      f: () => byId('false-colour').click(),
    };
    const act = keys[event.key.length > 1 ? event.key : event.key.toLowerCase()];
    if (!act || event.ctrlKey || event.altKey || event.metaKey) return;
    event.preventDefault();
    act();
  }

  tellControls() {
    const { view, facts } = this;
    byId('level-of').textContent = view.scene ? 'Sky behind' : 'Level';
    byId('level-is').textContent = this.levelText(view.level);
    const stops = Number(byId('exposure').value);
    byId('exposure-is').textContent = `${signed(stops)} EV`;
    byId('yaw-is').textContent = `${byId('yaw').value}°`;
    byId('pitch-is').textContent = `${byId('pitch').value}°`;
    byId('picture').setAttribute('aria-label', view.scene
      ? `A quay bollard, a rail and a pavement slab lit by ${facts.name}`
      : `${facts.name}, level ${view.level}`);
  }

  levelText(level) {
    const { size, about } = this.picture.files.specular;
    const at = level - this.facts.first_level;
    const low = Math.min(Math.floor(at), about.roughness.length - 1);
    const high = Math.min(low + 1, about.roughness.length - 1);
    const roughness = about.roughness[low] + (at - low) * (about.roughness[high] - about.roughness[low]);
    const edge = Math.max(1, size >> Math.round(at));
    return `${level.toFixed(2)}, roughness ${roughness.toFixed(3)}, ${edge} x ${edge}`;
  }

  tellScale() {
    const { facts, view } = this;
    const shown = view.falseColour ? facts.ramp : toneRamp(facts);
    byId('ramp').style.background = `linear-gradient(to right, ${shown.map(cssColour).join(', ')})`;
    const middle = facts.middle_grey / view.exposure;
    const ticks = [-1, -0.5, 0, 0.5, 1].map((share) => middle * 2 ** (share * facts.stops));
    byId('ticks').replaceChildren(...ticks.map((value) => made('li', shortNumber(value, 2))));
    byId('scale-unit').textContent = `luminance, ${facts.units}, over ${2 * facts.stops} stops`;
  }

  tellValue() {
    const { canvas, facts } = this;
    const at = this.pointer || { x: 0.5, y: 0.5 };
    const x = Math.min(Math.floor(at.x * canvas.width), canvas.width - 1);
    const y = Math.min(Math.floor(at.y * canvas.height), canvas.height - 1);
    const { values, shape } = this.picture.read(x, canvas.height - 1 - y, 1, 1);
    const rgb = Array.from(values.slice(0, 3));
    const luminance = rgb.reduce((sum, c, i) => sum + c * facts.luminance_weights[i], 0);
    byId('reading-at').textContent = this.pointer ? 'Under the pointer' : 'At the centre';
    byId('value').textContent = `RGB ${rgb.map((c) => shortNumber(c)).join(', ')}; luminance ${shortNumber(luminance)}${unitOf(facts)}`;
    byId('towards').textContent = shape < 0
      ? directionText(this.picture.direction(this.view, (x + 0.5) / canvas.width, (y + 0.5) / canvas.height))
      : facts.scene.shapes[shape].name;
    byId('mark').hidden = Boolean(this.pointer);
  }
}

function directionText(d) {
  const longitude = degrees(Math.atan2(d[0], d[2]));
  const latitude = degrees(Math.asin(d[1]));
  return `longitude ${fixed(longitude, 1)}°, latitude ${fixed(latitude, 1)}°, towards (${d.map((c) => fixed(c, 3)).join(', ')})`;
}

function unitOf({ units }) {
  return units === 'relative' ? '' : ` ${units}`;
}

function fixed(value, digits) {
  return value.toFixed(digits).replace(/^-(0\.?0*)$/, '$1');
}

function shortNumber(value, digits = 4) {
  const size = Math.abs(value);
  if (size === 0 || (size >= 0.001 && size < 99999.5)) return String(Number(value.toPrecision(digits)));
  return value.toExponential(digits - 1).replace('e+', 'e');
}

function signed(number) {
  return `${number > 0 ? '+' : ''}${number}`;
}

function made(tag, text) {
  const element = document.createElement(tag);
  element.textContent = text;
  return element;
}

function tellFacts(files, facts) {
  const { about, size, levels } = files.specular;
  const told = {
    file: facts.file,
    'on the GPU': `${facts.pixels}, 6 x ${size} x ${size}, ${levels.length} levels`,
    cube_axes: about.cube_axes,
    storage_ev: `${about.storage_ev}: radiance is the stored value x 2^${about.storage_ev}`,
    units: facts.units === 'relative' ? 'relative; the source was not calibrated' : facts.units,
    sun: facts.sun ? 'separated; a light beside the probe, not drawn here' : 'in the maps',
  };
  if (facts.first_level) {
    told['left out'] = `levels before ${facts.first_level}; skykiln report --view ${facts.name} --full has them`;
  }
  byId('told').replaceChildren(...Object.entries(told).flatMap(([key, text]) => [made('dt', key), made('dd', text)]));
  byId('about').textContent = `as packed in ${facts.file}`;
  byId('caution').hidden = facts.units === 'relative';
}

function bytesOf(id) {
  return Uint8Array.from(atob(byId(id).textContent), (c) => c.charCodeAt(0));
}

function tellTrouble(error, facts) {
  const others = facts.others.length && error.ofCoding ? ` Other packs of this probe: ${facts.others.join(', ')}.` : '';
  byId('trouble').textContent = `Nothing can be drawn: ${error.message}.${others}`;
  byId('trouble').hidden = false;
  for (const id of ['stage', 'scale', 'reading', 'controls', 'keys']) byId(id).hidden = true;
}

let page = null;

function openPage() {
  const facts = JSON.parse(byId('facts').textContent);
  const files = Object.fromEntries(['specular', 'irradiance', 'brdf'].map((id) => [id, readKtx2(bytesOf(id))]));
  tellFacts(files, facts);
  try {
    page = new Page(new Picture(byId('picture'), files, facts), facts);
  } catch (error) {
    tellTrouble(error, facts);
  }
}

// Greys as they are tone mapped, over the stops of the scale.
function toneRamp({ stops, middle_grey: middle, ramp }) {
  return ramp.map((_, i) => {
    const x = middle * 2 ** (stops * ((2 * i) / (ramp.length - 1) - 1));
    return Array(3).fill(Math.min((x / (1 + x)) * 1.25, 1));
  });
}

function cssColour(linear) {
  const encode = (x) => Math.round(255 * (x <= 0.0031308 ? 12.92 * x : 1.055 * x ** (1 / 2.4) - 0.055));
  return `rgb(${linear.map(encode).join(', ')})`;
}

openPage();
