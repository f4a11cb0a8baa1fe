// Prints what ktx-parse finds in a KTX2 file, as JSON. Arguments: the package's folder, the file.
import { readFileSync } from 'node:fs';
import { pathToFileURL } from 'node:url';

const [folder, file] = process.argv.slice(2);
const { read } = await import(pathToFileURL(`${folder}/ktx-parse/dist/index.mjs`));
const plain = (value) => (ArrayBuffer.isView(value) ? Array.from(value) : value);
const container = read(new Uint8Array(readFileSync(file)));
container.levels = container.levels.map(({ levelData, uncompressedByteLength }) => ({
  levelData: Buffer.from(levelData).toString('base64'),
  uncompressedByteLength,
}));
console.log(JSON.stringify(container, (_, value) => plain(value)));
