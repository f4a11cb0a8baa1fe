'use strict';
// From the bytes of a KTX2 file to a texture. Formats go by vkFormat.

const BC6H = 143;
const CUBE_SIGNS = { negate_x: [-1, 1, 1], negate_z: [1, 1, -1], direct: [1, 1, 1] };

function texelFormats(gl) {
  return {
    97: [Uint16Array, gl.RGBA16F, gl.RGBA, gl.HALF_FLOAT],
    123: [Uint32Array, gl.RGB9_E5, gl.RGB, gl.UNSIGNED_INT_5_9_9_9_REV],
    122: [Uint32Array, gl.R11F_G11F_B10F, gl.RGB, gl.UNSIGNED_INT_10F_11F_11F_REV],
    83: [Uint16Array, gl.RG16F, gl.RG, gl.HALF_FLOAT],
  };
}

// A cube map of six faces, or a table of one. Throws what a person can be told.
function uploadTexture(gl, file, unit) {
  const cube = file.faces === 6;
  const target = cube ? gl.TEXTURE_CUBE_MAP : gl.TEXTURE_2D;
  const firstFace = cube ? gl.TEXTURE_CUBE_MAP_POSITIVE_X : gl.TEXTURE_2D;
  const put = file.vkFormat === BC6H ? blocksInto(gl) : texelsInto(gl, file.vkFormat);
  gl.activeTexture(gl.TEXTURE0 + unit);
  gl.bindTexture(target, gl.createTexture());
  gl.pixelStorei(gl.UNPACK_ALIGNMENT, 1);
  file.levels.forEach((level, k) => {
    const edge = Math.max(1, file.size >> k);
    const share = level.length / file.faces;
    for (let face = 0; face < file.faces; face += 1) {
      put(firstFace + face, k, edge, level.subarray(face * share, (face + 1) * share));
    }
  });
  const mipped = file.levels.length > 1;
  gl.texParameteri(target, gl.TEXTURE_MAX_LEVEL, file.levels.length - 1);
  gl.texParameteri(target, gl.TEXTURE_MIN_FILTER, mipped ? gl.LINEAR_MIPMAP_LINEAR : gl.LINEAR);
  gl.texParameteri(target, gl.TEXTURE_MAG_FILTER, gl.LINEAR);
  gl.texParameteri(target, gl.TEXTURE_WRAP_S, gl.CLAMP_TO_EDGE);
  gl.texParameteri(target, gl.TEXTURE_WRAP_T, gl.CLAMP_TO_EDGE);
}

function blocksInto(gl) {
  const bptc = gl.getExtension('EXT_texture_compression_bptc');
  if (!bptc) {
    const lack = new Error('this browser cannot read BC6H: EXT_texture_compression_bptc is missing');
    throw Object.assign(lack, { ofCoding: true });
  }
  const format = bptc.COMPRESSED_RGB_BPTC_UNSIGNED_FLOAT_EXT;
  return (target, k, edge, image) => gl.compressedTexImage2D(target, k, format, edge, edge, 0, image);
}

function texelsInto(gl, vkFormat) {
  const [Words, internal, format, type] = texelFormats(gl)[vkFormat];
  return (target, k, edge, image) => {
    const words = new Words(image.buffer, image.byteOffset, image.length / Words.BYTES_PER_ELEMENT);
    gl.texImage2D(target, k, internal, edge, edge, 0, format, type, words);
  };
}
