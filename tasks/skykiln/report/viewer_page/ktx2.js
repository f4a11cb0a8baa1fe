'use strict';
// Reading KTX2 files that are not supercompressed (Khronos KTX 2.0, "File Structure").

const KTX2_IDENTIFIER = [0xab, 0x4b, 0x54, 0x58, 0x20, 0x32, 0x30, 0xbb, 0x0d, 0x0a, 0x1a, 0x0a];

// bytes: Uint8Array -> {vkFormat, size, faces, levels: [Uint8Array, the largest first], about}
function readKtx2(bytes) {
  if (!KTX2_IDENTIFIER.every((byte, i) => bytes[i] === byte)) throw new Error('not a KTX2 file');
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  const word = (at) => view.getUint32(at, true);
  const long = (at) => Number(view.getBigUint64(at, true));
  const [vkFormat, , size, , , , faces, count, scheme] =
    Array.from({ length: 9 }, (_, i) => word(12 + 4 * i));
  if (scheme !== 0) throw new Error('supercompressed; the page needs a plain copy');
  const levels = Array.from({ length: count }, (_, k) =>
    bytes.subarray(long(80 + 24 * k), long(80 + 24 * k) + long(88 + 24 * k)));
  const pairs = keyValues(bytes, view, word(56), word(60));
  return { vkFormat, size, faces, levels, about: JSON.parse(pairs.skykiln || '{}') };
}

// "Key/Value Data": texts by their keys.
function keyValues(bytes, view, start, length) {
  const pairs = {};
  const text = (from, to) => new TextDecoder().decode(bytes.subarray(from, to));
  for (let at = start; at < start + length;) {
    const size = view.getUint32(at, true);
    const end = at + 4 + size;
    const middle = bytes.indexOf(0, at + 4);
    pairs[text(at + 4, middle)] = text(middle + 1, end).replace(/\0$/, '');
    at = end + (4 - (size % 4)) % 4;
  }
  return pairs;
}
