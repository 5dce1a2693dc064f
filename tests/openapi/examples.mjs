// SPDX-License-Identifier: GPL-3.0-or-later
// The examples of the description: each answer's x-request is the request that brings it, the
// request body the example of the same name. An example must be what the daemon really answers, but
// for what differs from run to run or from machine to machine.
const DIFFERS = new Set(['served_at', 'created_at', 'at', 'instance', 'digest', 'version',
  'checked_by', 'built_with', 'iterations', 'boxes', 'cells', 'largest_dropped',
  'worst_derivative']);
// A build with sanitizers prepares solution sets with fewer paths (server/api/CMakeLists.txt); the
// Release build holds the example to them.
if (process.env.LWT_FEW_PATHS) {
  ['solution_sets', 'findings', 'notes'].forEach((name) => DIFFERS.add(name));
}
const NEAR = 1e-6; // of a number: rounding only, far below any tolerance of a machine

// Catalog changes last: the examples before them see the demo line as it was loaded.
const ORDER = ['PUT', 'revisions/1 ', 'publish', 'reach?rz', 'difference', 'withdraw'];

function rank(example) {
  const key = `${example.method} ${example.target} `;
  return ORDER.findLastIndex((part) => key.includes(part) && key.includes('flap'));
}

export function exampleAnswers(document) {
  const all = [];
  for (const [path, item] of Object.entries(document.paths)) {
    for (const [method, operation] of Object.entries(item).filter(([, o]) => o.responses)) {
      const bodies = operation.requestBody?.content['application/json'].examples ?? {};
      for (const [status, response] of Object.entries(operation.responses)) {
        for (const [type, media] of Object.entries(response.content ?? {})) {
          for (const [name, example] of Object.entries(media.examples ?? {})) {
            const [verb, target] = example['x-request'].split(' ');
            all.push({ title: `${name} ${path.split('/').pop()}`, method: verb, target, type,
              status: Number(status), body: bodies[name]?.value, example });
            if (verb !== method.toUpperCase()) {
              throw new Error(`x-request of ${path} ${name} is of another method`);
            }
          }
        }
      }
    }
  }
  // 201 before 200 of the same PUT; else in the order of the document.
  return all.map((e, i) => ({ e, i })).sort((a, b) => rank(a.e) - rank(b.e)
    || b.e.status - a.e.status || a.i - b.i).map(({ e }) => e);
}

// Differences between an example and the answer, as sentences with their places.
export function compare(was, is, place = '') {
  const key = place.split('/').pop();
  if (DIFFERS.has(key)) {
    return typeof was === typeof is ? [] : [`${place} is of another type`];
  }
  if (typeof was === 'number' && typeof is === 'number') {
    return Math.abs(was - is) <= NEAR * Math.max(1, Math.abs(was)) ? []
      : [`${place} is ${is}, the description says ${was}`];
  }
  if (was === null || is === null || typeof was !== 'object' || typeof is !== 'object') {
    return was === is ? [] : [`${place || 'it'} is ${JSON.stringify(is)}, the description says `
      + JSON.stringify(was)];
  }
  const names = new Set([...Object.keys(was), ...Object.keys(is)]);
  return [...names].flatMap((name) => compare(was[name] ?? null, is[name] ?? null,
    `${place}/${name}`));
}
