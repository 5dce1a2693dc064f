// SPDX-License-Identifier: GPL-3.0-or-later
// The daemon's own tables against the description: routes with their roles and bodies, problems
// with their codes; and whether the checks would see a fault at all.
import { readFileSync } from 'node:fs';
import { join } from 'node:path';

import { root } from './modules.mjs';

const api = join(root, 'server', 'api');

function routerTable() {
  const text = readFileSync(join(api, 'app.c'), 'utf8');
  const row = /\{LWD_(\w+), "([^"]+)",\s*lwd_\w+,\s*LWD_ROLE_(\w+),\s*\w+,\s*(\w+),\s*"/g;
  return [...text.matchAll(row)].map(([, method, pattern, role, bytes]) => ({
    route: `${method} ${pattern}`, role: role.toLowerCase(), body: bytes !== '0' }));
}

export function checkRoutes(description, fault) {
  const table = routerTable();
  const described = description.operations.map((o) => ({
    route: `${o.method.toUpperCase()} ${o.path.replace(/\{\w+\}/g, '{}')}`,
    role: o.operation.security.find((s) => s.token)?.token[0] ?? 'none',
    body: o.operation.requestBody !== undefined }));
  const rows = [...new Set([...table, ...described].map((r) => r.route))].sort();
  console.log('routes: the router\'s table, the description');
  for (const route of rows) {
    const a = table.find((r) => r.route === route);
    const b = described.find((r) => r.route === route);
    console.log(`  ${a ? 'served' : '      '} ${b ? 'described' : '         '} ${route}`);
    if (!a || !b) {
      fault(route, a ? 'is served but not described' : 'is described but not served');
    } else if (a.role !== b.role || a.body !== b.body) {
      fault(route, `role ${a.role}, described ${b.role}; body ${a.body}, described ${b.body}`);
    }
  }
  if (table.length < 20) {
    fault('routes', 'the table in app.c was not read');
  }
}

export async function checkProblems(description, good, codes, notHere, fault) {
  const row = /X\(\w+, (\d+), (\d+), "([a-z-]+)",[\s\\]*"([^"]+)"\)/g;
  const listed = ['../http/problems.h', 'problem_codes.h'].flatMap((name) => [
    ...readFileSync(join(api, name), 'utf8').matchAll(row)]).map(([, code, status, slug]) => ({
    code: Number(code), status: Number(status), slug }));
  const described = description.document.components.schemas.ProblemCode.oneOf;
  for (const { code, status, slug } of listed) {
    const entry = described.find((d) => d.const === code);
    if (entry?.title !== slug || !entry.description.startsWith(`HTTP ${status}.`)) {
      fault(`problem ${code} ${slug}`, 'is not described, or otherwise');
    }
    const help = await good(`problem ${slug}`, 'GET', `/problems/${slug}`);
    if (help.json?.code !== code || help.json?.status !== status) {
      fault(`problem ${slug}`, 'its page says', help.text);
    }
    if (codes.has(code) === (code in notHere)) {
      fault(`problem ${code} ${slug}`, code in notHere ? 'was provoked after all; mend refusals.mjs'
        : 'was not provoked by any request');
    }
  }
  described.filter((d) => !listed.some((l) => l.code === d.const))
    .forEach((d) => fault(`problem ${d.const}`, 'is described but not in the lists'));
  if (listed.length < 40) {
    fault('problems', 'the lists were not read');
  }
}

// Each answer must stop fitting once a member is taken out, one is added, or one has another type.
export async function checkBlindness(description, daemon, fault) {
  const pose = { x: 15, y: -10, rz: 6 };
  for (const [kind, schema] of [['inverse', 'InverseAnswer'], ['jacobian', 'JacobianAnswer'],
    ['margin', 'MarginAnswer'], ['reach', 'ReachAnswer']]) {
    const { text } = await daemon.ask('POST', `/v1/mechanisms/label-stage/${kind}`,
      { body: { pose } });
    const place = `/components/schemas/${schema}`;
    const whole = JSON.parse(text);
    if (description.errors('strict', place, whole)) {
      fault(`blind: ${schema}`, 'the answer does not fit unchanged');
    }
    for (const name of Object.keys(whole)) {
      const { [name]: gone, ...less } = whole;
      const needed = description.document.components.schemas[schema].required.includes(name);
      if (needed && !description.errors('open', place, less)) {
        fault(`blind: ${schema}`, `it does not miss ${name}`);
      }
      if (!description.errors('open', place, { ...whole, [name]: Symbol.iterator in Object(gone)
        ? 17 : ['x'] })) {
        fault(`blind: ${schema}`, `${name} may be anything`);
      }
    }
    if (!description.errors('strict', place, { ...whole, surprise: 1 })
      || !description.errors('strict', place, { ...whole, units: { ...whole.units, mass: 'kg' } })
      || description.errors('open', place, { ...whole, surprise: 1 })) {
      fault(`blind: ${schema}`, 'a member too many is told where it should not be, or not told');
    }
  }
}
