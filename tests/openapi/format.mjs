// SPDX-License-Identifier: GPL-3.0-or-later
// One way to write the description, so that its changes read well: two blanks a level, and on one
// line what fits on it. `node format.mjs FILE` rewrites a file, `--check FILE` only says whether it
// is written so.
import { readFileSync, writeFileSync } from 'node:fs';
import { pathToFileURL } from 'node:url';

const COLUMNS = 100;

function flat(value) {
  if (Array.isArray(value)) {
    return `[${value.map(flat).join(', ')}]`;
  }
  if (value !== null && typeof value === 'object') {
    const members = Object.entries(value).map(([k, v]) => `${JSON.stringify(k)}: ${flat(v)}`);
    return `{${members.join(', ')}}`;
  }
  return JSON.stringify(value);
}

function lines(value, indent, before) {
  const line = flat(value);
  if (value === null || typeof value !== 'object' || before + line.length <= COLUMNS) {
    return line;
  }
  const inner = ' '.repeat(indent + 2);
  const parts = Array.isArray(value)
    ? value.map((v) => inner + lines(v, indent + 2, indent + 3))
    : Object.entries(value).map(([k, v]) => {
      const key = `${inner}${JSON.stringify(k)}: `;
      return key + lines(v, indent + 2, key.length + 1);
    });
  const [open, close] = Array.isArray(value) ? '[]' : '{}';
  return `${open}\n${parts.join(',\n')}\n${' '.repeat(indent)}${close}`;
}

export function format(value) {
  return `${lines(value, 0, 0)}\n`;
}

if (process.argv[1] && import.meta.url === pathToFileURL(process.argv[1]).href) {
  const check = process.argv[2] === '--check';
  const file = process.argv[check ? 3 : 2];
  const was = readFileSync(file, 'utf8');
  const is = format(JSON.parse(was));
  if (was !== is && check) {
    console.error(`${file} is not written as tests/openapi/format.mjs writes it; run that on it`);
    process.exit(1);
  }
  if (was !== is) {
    writeFileSync(file, is);
  }
}
