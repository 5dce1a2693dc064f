// SPDX-License-Identifier: GPL-3.0-or-later
// Whether the described form of documents and questions is the form the daemon takes. Good ones are
// spoilt in one place at a time (a member too many, a member taken out, a value of another type);
// then the description and the daemon must agree on what is wrong in form.
import { readFileSync } from 'node:fs';
import { join } from 'node:path';

import { root } from './modules.mjs';
import { asked } from './questions.mjs';

// Findings that are about form alone; where the daemon has one, the description must refuse too.
const FORM = new Set(['unknown-member', 'missing-member', 'wrong-type', 'two-postures',
  'two-orientations', 'mode-without-pose', 'nested-near', 'no-posture', 'too-few', 'too-many']);

// Every value inside, with the way to it; the value itself comes first. Of a list of numbers or
// names the first stands for all.
function* places(value, way = []) {
  yield [way, value];
  if (value !== null && typeof value === 'object') {
    const plain = Array.isArray(value) && value.every((v) => v === null || typeof v !== 'object');
    for (const [key, child] of Object.entries(value).slice(0, plain ? 1 : undefined)) {
      yield* places(child, [...way, key]);
    }
  }
}

function changed(value, way, change) {
  const copy = structuredClone(value);
  if (way.length === 0) {
    return change(copy);
  }
  const parent = way.slice(0, -1).reduce((at, key) => at[key], copy);
  parent[way.at(-1)] = change(parent[way.at(-1)]);
  return copy;
}

function* spoilt(good) {
  for (const [way, value] of places(good)) {
    const name = `/${way.join('/')}`;
    if (value !== null && typeof value === 'object' && !Array.isArray(value)) {
      yield [`${name} with a member too many`,
        changed(good, way, (at) => ({ ...at, 'Not A Name': 1 }))];
      for (const key of Object.keys(value)) {
        yield [`${name} without ${key}`, changed(good, way, ({ [key]: _, ...rest }) => rest)];
      }
    }
    if (way.length > 0) {
      const other = typeof value === 'string' || (value !== null && typeof value === 'object')
        ? 17.5 : 'no such thing';
      yield [`${name} of another type`, changed(good, way, () => other)];
    }
  }
}

// The codes of the findings; null where the request was answered.
function told(answer) {
  return answer.status < 400 ? null : (answer.json.findings ?? []).map((f) => f.finding);
}

async function hold(title, description, body, answer, fault) {
  const error = description.request(description.find(answer.method, answer.target), body);
  const findings = told(answer);
  const first = answer.json?.findings?.[0];
  if (error && findings === null) {
    fault(title, `the daemon takes what the description refuses: ${error}`);
  }
  const formal = findings?.find((code) => FORM.has(code));
  // Which joints are balls, and so take a rotation and no number, only the mechanism knows.
  if (!error && formal && !/\/joints\/[a-z0-9-]+$/.test(first.pointer)) {
    fault(title, `the description takes what the daemon refuses as ${formal}: `
      + answer.json.findings.map((f) => f.text).join(' '));
  }
  return error !== null;
}

export async function checkAgreement(description, ask, fault) {
  const cases = join(root, 'tests', 'cases', 'faults', 'everything.json');
  const document = JSON.parse(readFileSync(cases, 'utf8'));
  let seen = 0;
  let refused = 0;
  const put = async (title, body) => {
    const target = `/v1/mechanisms/${document.name}`;
    const answer = await ask(title, 'PUT', target, { body });
    seen += 1;
    refused += await hold(title, description, body, { ...answer, method: 'PUT', target }, fault)
      ? 1 : 0;
  };
  await put('everything', document);
  for (const [what, body] of spoilt(document)) {
    await put(`document ${what}`, body);
  }
  const done = new Set();
  for (const [name, kind, good] of asked) {
    for (const [what, body] of spoilt(good)) {
      const key = `${name} ${kind} ${JSON.stringify(body)}`;
      if (!done.has(key)) {
        done.add(key);
        const target = `/v1/mechanisms/${name}/${kind}`;
        const title = `${name} ${kind} ${what}`;
        const answer = await ask(title, 'POST', target, { body });
        seen += 1;
        refused += await hold(title, description, body, { ...answer, method: 'POST', target },
          fault) ? 1 : 0;
      }
    }
  }
  console.log(`agreement: ${seen} requests spoilt in one place, ${refused} of them in form`);
  if (refused < 500) {
    fault('agreement', `only ${refused} requests were wrong in form`);
  }
}
