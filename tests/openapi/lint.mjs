// SPDX-License-Identifier: GPL-3.0-or-later
// Two linters and the formatter over server/api/openapi.json, then the linters over a faulty copy
// of it that they must refuse: a linter that lets everything pass would look the same as a
// clean description.
import { spawnSync } from 'node:child_process';
import { mkdtempSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';

import { here, modules, root } from './modules.mjs';

const file = join(root, 'server', 'api', 'openapi.json');
const linters = {
  spectral: [join(modules, '@stoplight', 'spectral-cli', 'dist', 'index.js'), 'lint', '--quiet',
    '--ruleset', join(here, '.spectral.yaml'), '--fail-severity', 'hint'],
  'schema-validator': [join(modules, '@seriousme', 'openapi-schema-validator', 'bin',
    'validate-api-cli.js')],
};
// What is spoilt, how, which linters see it, and by what text of theirs.
const faulty = [
  ['a parameter of the path that is optional', ['spectral'], 'Mechanism', (d) => {
    d.components.parameters.Mechanism.required = false;
  }],
  ['a response without a description', ['spectral', 'schema-validator'], 'BadRequest', (d) => {
    delete d.components.responses.BadRequest.description;
  }],
  ['an example that is none', ['spectral'], 'oas3-valid-media-example', (d) => {
    d.paths['/healthz'].get.responses['200'].content['application/json'].examples.alive.value = {
      health: 'well' };
  }],
];
let bad = 0;

function say(good, text, output = '') {
  bad += good ? 0 : 1;
  console.log(`  ${good ? 'holds ' : 'FAULT '} ${text}${good ? '' : `\n${output}`}`);
}

function run(name, path) {
  const { status, stdout, stderr } = spawnSync(process.execPath, [...linters[name], path],
    { encoding: 'utf8', cwd: here });
  return { clean: status === 0, output: `${stdout}${stderr}`.slice(0, 20000) };
}

for (const name of Object.keys(linters)) {
  const { clean, output } = run(name, file);
  say(clean, `${name}: the description`, output);
}
const format = spawnSync(process.execPath, [join(here, 'format.mjs'), '--check', file],
  { encoding: 'utf8' });
say(format.status === 0, 'format: the description', format.stderr);

const dir = mkdtempSync(join(tmpdir(), 'leeway-openapi-'));
try {
  for (const name of Object.keys(linters)) {
    const document = JSON.parse(readFileSync(file, 'utf8'));
    const mine = faulty.filter(([, seen]) => seen.includes(name));
    mine.forEach(([, , , spoil]) => spoil(document));
    const path = join(dir, 'faulty.json');
    writeFileSync(path, JSON.stringify(document));
    const { clean, output } = run(name, path);
    mine.forEach(([title, , text]) => say(!clean && output.includes(text),
      `${name} refuses ${title}`, output));
  }
} finally {
  rmSync(dir, { recursive: true, force: true });
}
console.log(bad === 0 ? 'no faults' : `${bad} faults`);
process.exit(bad === 0 ? 0 : 1);
