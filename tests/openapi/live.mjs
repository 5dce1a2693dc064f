// SPDX-License-Identifier: GPL-3.0-or-later
// Holds the running daemon to its own description. Loads the demo line, asks every route with good
// and bad requests, and checks each answer's status, type, headers and body against the served
// /openapi.json; asks every example and compares it with what the description prints; compares the
// routes of the router's table with those described. LEEWAYD=program node live.mjs
//   --renew writes the real answers into the examples of server/api/openapi.json.
import { readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';

import { checkAgreement } from './agreement.mjs';
import { Daemon } from './daemon.mjs';
import { Description } from './description.mjs';
import { compare, exampleAnswers } from './examples.mjs';
import { format } from './format.mjs';
import { root } from './modules.mjs';
import { asked, batches, queries, tables, verdicts } from './questions.mjs';
import { not_here, refusals } from './refusals.mjs';
import { checkBlindness, checkProblems, checkRoutes } from './tables.mjs';

const DEMO = ['tilt-table', 'belt-hopper', 'lid-turner', 'label-stage', 'case-packer'];
// What may come where there is no operation.
const OUTSIDE = { 400: 'BadRequest', 404: 'NotFound', 405: 'NotAllowed', 414: 'UrlTooLong' };
const file = join(root, 'server', 'api', 'openapi.json');
const renew = process.argv[2] === '--renew';
const faults = [];
const codes = new Set();
let count = 0;
let daemon;
let description;

function fault(title, ...what) {
  faults.push(`${title}: ${what.join(' ')}`);
}

const demo = (name) => JSON.parse(readFileSync(join(root, 'deploy', 'demo', `${name}.json`)));

// Asks, checks the answer against the description, and returns it with its JSON.
async function ask(title, method, target, request = {}, on = daemon) {
  const answer = await on.ask(method, target, request);
  const at = description.find(method, target);
  count += 1;
  if (at) {
    description.answer(at, method, answer)
      .forEach((what) => fault(`${title} (${method} ${target.slice(0, 80)})`, what));
  } else {
    // No operation: then only a problem without one, of a path or a method, may come.
    const name = OUTSIDE[answer.status];
    const responses = { [answer.status]: { $ref: `#/components/responses/${name}` } };
    const stand = { operation: { responses }, method: 'none', path: 'none' };
    (name ? description.answer(stand, method, answer) : [`status ${answer.status}`])
      .forEach((what) => fault(`${title} (${method} ${target.slice(0, 80)})`, what));
  }
  if ((answer.headers['content-type'] ?? '').includes('json') && answer.text !== '') {
    answer.json = JSON.parse(answer.text);
  }
  return answer;
}

// A request that must be answered well, and that the description must take.
async function good(title, method, target, request = {}, status = 200) {
  const at = description.find(method, target);
  description.query(at, target).forEach((what) => fault(title, target, what));
  if (request.body !== undefined && !request.headers?.['Content-Type']) {
    const error = description.request(at, request.body);
    if (error) {
      fault(title, 'the description refuses the request:', error);
    }
  }
  const answer = await ask(title, method, target, request);
  if (answer.status !== status) {
    fault(title, `${method} ${target}: ${status} expected, got`, answer.status, answer.text);
  }
  return answer;
}

async function load(document, { publish = true, accept } = {}) {
  const path = `/v1/mechanisms/${document.name}`;
  const stored = await good(`store ${document.name}`, 'PUT', path, { body: document }, 201);
  if (publish) {
    const number = stored.json.revision;
    await good(`publish ${document.name}`, 'POST', `${path}/revisions/${number}/publish`,
      { body: { reason: 'loaded for a check', ...(accept && { accept }) } });
  }
  return stored.json;
}

async function examples() {
  for (const e of exampleAnswers(description.document)) {
    const request = { body: e.body, headers: { Accept: e.type } };
    if (e.title.endsWith('flap difference')) { // it speaks of a second revision
      await load(longer(demoFlap()), { publish: false });
    }
    const answer = await good(`example ${e.title}`, e.method, e.target, request, e.status);
    const is = e.type.includes('json') ? answer.json : answer.text;
    if (renew) {
      e.example.value = is;
    } else {
      compare(e.example.value, is).slice(0, 4)
        .forEach((what) => fault(`example ${e.title}`, what, '(node live.mjs --renew)'));
    }
  }
}

const demoFlap = () => description.document.paths['/v1/mechanisms/{name}'].put.requestBody
  .content['application/json'].examples.flap.value;
const longer = (flap) => ({ ...flap, tools: [{ ...flap.tools[0], at: [150, 0, 0] }] });

async function questions() {
  const brought = new Set();
  for (const [name, kind, body, code] of asked) {
    const answer = await good(`${name} ${kind} ${JSON.stringify(body).slice(0, 60)}`, 'POST',
      `/v1/mechanisms/${name}/${kind}`, { body });
    brought.add(answer.json?.code);
    if (code !== null && answer.json?.code !== code) {
      fault(`${name} ${kind}`, JSON.stringify(body), `code ${code} expected, got`,
        answer.json?.code, answer.json?.reason);
    }
    if (kind === 'reach') {
      const plain = await good(`${name} reach as text`, 'POST', `/v1/mechanisms/${name}/${kind}`,
        { body, headers: { Accept: 'text/plain' } });
      if (!plain.text.includes(`code=${answer.json?.code}\n`)) {
        fault(`${name} reach as text`, 'says another verdict than the JSON answer:', plain.text);
      }
    }
  }
  verdicts.filter((code) => !brought.has(code))
    .forEach((code) => fault('questions', `no answer had the verdict ${code}`));
  for (const [kind, body] of batches) {
    const answer = await good(`batch of ${kind}`, 'POST', `/v1/mechanisms/label-stage/${kind}`,
      { body });
    const status = answer.json?.answers?.map((a) => a.status ?? 200).join(' ');
    if (status !== '200 422 200') {
      fault(`batch of ${kind}`, 'answers and one refusal between them expected, got', status);
    }
  }
  for (const [name, query, body, code] of tables) {
    const target = `/v1/mechanisms/${name}/path?${query}`;
    const headers = { 'Content-Type': 'text/csv; charset=utf-8' };
    const answer = await good(`${name} path as a table`, 'POST', target, { body, headers });
    const table = await good(`${name} path as a table, answered so`, 'POST', target,
      { body, headers: { ...headers, Accept: 'text/csv' } });
    if (code !== null && answer.json?.code !== code) {
      fault(`${name} path as a table`, body, `code ${code} expected, got`, answer.text);
    }
    if (table.headers['x-code'] !== String(answer.json?.code)
      || table.text.split('\r\n').length !== answer.json.moves.length + 2) {
      fault(`${name} path as a table`, 'is answered otherwise than in JSON:', table.text);
    }
  }
  for (const [name, kind, query] of queries) {
    const target = `/v1/mechanisms/${name}/${kind}?${query}`;
    await good(`${name} ${kind} by query`, 'GET', target);
    if (kind === 'reach') {
      await good(`${name} reach by query as text`, 'GET', target,
        { headers: { Accept: 'text/plain' } });
    }
  }
}

// An arm with a freedom to spare: the set of its solutions has a dimension.
async function spare() {
  const flap = demoFlap();
  const slack = { ...flap, name: 'slack', bodies: ['wall', 'flap', 'rim'], motion: undefined,
    joints: [flap.joints[0], { ...flap.joints[0], name: 'fold', between: ['flap', 'rim'],
      at: [120, 0, 0] }],
    drives: [flap.drives[0], { ...flap.drives[0], name: 'm2', moves: 'fold' }],
    tools: [{ ...flap.tools[0], body: 'rim' }] };
  await load(slack, { publish: false });
  const answer = await good('a freedom to spare', 'POST', '/v1/mechanisms/slack/inverse',
    { body: { pose: { rz: 30 }, revision: 1, near: { drives: { m1: 0, m2: 0 } } } });
  if (answer.json.dimension !== 1 || answer.json.complete !== false) {
    fault('a freedom to spare', 'dimension 1 expected, got', answer.text.slice(0, 900));
  }
}

// Pages by their links, tags that still hold, the head alone, a second revision.
async function catalog() {
  const list = '/v1/mechanisms?limit=2';
  const first = await good('the first page', 'GET', list);
  const link = /^<([^>]+)>; rel="next"$/.exec(first.headers.link ?? '')?.[1];
  const next = link && await good('the next page', 'GET', link);
  if (!next || next.json.mechanisms[0].mechanism <= first.json.next) {
    fault('pages', 'the link does not lead on:', link);
  }
  for (const part of ['revisions', 'history']) {
    await good(part, 'GET', `/v1/mechanisms/flap/${part}?limit=1&cursor=1`);
  }
  for (const path of ['/v1/mechanisms/flap/state', '/v1/mechanisms/flap/revisions/1',
    '/v1/mechanisms/flap']) {
    const { headers } = await good('a tag', 'GET', path);
    await good('a tag that holds', 'GET', path, { headers: { 'If-None-Match': headers.etag } },
      304);
    await good('another tag', 'GET', path, { headers: { 'If-None-Match': '"other"' } });
  }
  await good('modes of a revision', 'GET', '/v1/mechanisms/case-packer/modes?revision=1');
  const { digest } = (await good('state', 'GET', '/v1/mechanisms/label-stage/state')).json;
  const others = [['reach', 'x=.015&y=-.01&rz=.1'], ['margin', 'm1=1&m2=2&m3=3&m4=4']];
  for (const [kind, members] of others) {
    await good(`${kind} in other units`, 'GET',
      `/v1/mechanisms/label-stage/${kind}?${members}&units.length=m&units.angle=rad`);
  }
  await good('an expected revision', 'GET',
    `/v1/mechanisms/label-stage/reach?x=1&y=1&rz=0&expect=${digest.slice(0, 8)}`);
  await good('an expected digest beside a table', 'POST', '/v1/mechanisms/label-stage/path?'
    + `from.m1=90&from.m2=180&from.m3=270&from.m4=0&expect=${digest.slice(0, 8)}`,
    { body: 'move,x,y,rz\nline,1,1,0\n', headers: { 'Content-Type': 'text/csv' } });
  await good('an expected digest', 'GET',
    `/v1/mechanisms/label-stage/margin?m1=90&m2=180&m3=270&m4=0&expect=${digest}`);
  await good('an expected digest in a body', 'POST', '/v1/mechanisms/label-stage/inverse',
    { body: { pose: { x: 1, y: 1, rz: 0 }, expect: digest.toUpperCase() } });
  const changed = { ...demo('label-stage'), title: 'Another title',
    notes: undefined, checks: undefined };
  changed.drives = changed.drives.map((d) => ({ ...d, speed: d.speed / 2, backlash: undefined }));
  changed.joints = changed.joints.map((j, i) => (i === 0 ? { ...j, range: [-140, null] } : j));
  changed.tools = [{ ...changed.tools[0], at: [1, 2, 3], orientation: { rz: 10 } },
    { name: 'pen', body: 'plate', at: [0, 0, 9] }];
  const state = await good('state', 'GET', '/v1/mechanisms/label-stage/state');
  const stored = await good('a second revision', 'PUT', '/v1/mechanisms/label-stage',
    { body: changed, headers: { 'If-Match': `"${state.json.digest}"` } }, 201);
  const told = await good('a difference', 'GET',
    `/v1/mechanisms/label-stage/difference?from=1&to=${stored.json.revision}`);
  if (!(told.json.count > 8)) {
    fault('a difference', `${told.json.count} changes are too few`);
  }
  const second = `/v1/mechanisms/label-stage/revisions/${stored.json.revision}`;
  await good('its report', 'GET', `${second}/report`);
  await good('publish by the tag', 'POST', `${second}/publish`,
    { headers: { 'If-Match': state.headers.etag }, body: { accept: ['range-leaves-joint'] } });
  await good('and back again', 'POST', '/v1/mechanisms/label-stage/revisions/1/publish',
    { body: {} });
}

async function heads() {
  const paths = description.operations.filter((o) => o.method === 'get').map((o) => o.path
    .replace('{name}', 'label-stage').replace('{number}', '1').replace('{slug}', 'no-sense'));
  const query = { difference: '?from=1&to=1', margin: '?m1=90&m2=180&m3=270&m4=0',
    reach: '?x=1&y=1&rz=0' };
  for (const path of paths) {
    const target = path + (query[path.split('/').pop()] ?? '');
    const whole = await good('GET', 'GET', target);
    const head = await good('HEAD', 'HEAD', target);
    const same = ['content-type', 'etag', 'vary', 'cache-control'];
    if (!target.startsWith('/metrics')) { // its figures change from one request to the next
      same.push('content-length');
    }
    for (const name of same) {
      if (head.headers[name] !== whole.headers[name]) {
        fault(`HEAD ${target}`, name, head.headers[name], 'is not', whole.headers[name]);
      }
    }
  }
}

async function refused() {
  await load({ ...demoFlap(), name: 'draft' }, { publish: false });
  await load({ ...demoFlap(), name: 'gone' });
  await good('withdraw', 'POST', '/v1/mechanisms/gone/revisions/1/withdraw', {});
  const wide = { ...demoFlap(), name: 'wide' };
  wide.drives = [{ ...wide.drives[0], range: [-120, 120] }];
  await load(wide, { publish: false });
  const documents = { flap: demoFlap(), 'label-stage': demo('label-stage') };
  for (const [title, method, target, request, status, code, more = {}] of refusals(documents)) {
    const answer = await ask(title, method, target, request);
    const got = answer.json?.code ?? Number(/^code=(\d+)/.exec(answer.text)?.[1]);
    codes.add(got);
    if (answer.status !== status || (code !== null && got !== code)) {
      fault(title, `${status} ${code} expected, got ${answer.status}`, answer.text.slice(0, 400));
    }
    if (more.pointer !== undefined && answer.json?.pointer !== more.pointer) {
      fault(title, `the place ${more.pointer} expected, got`, answer.json?.pointer);
    }
    if (more.takes !== undefined) {
      const error = description.request(description.find(method, target),
        JSON.parse(JSON.stringify(request.body)));
      if ((error === null) !== more.takes) {
        fault(title, `the description ${more.takes ? 'refuses' : 'takes'} the body`, error ?? '');
      }
    }
  }
  const long = await ask('a head of 40 kB', 'GET', '/healthz',
    { headers: { 'X-A': 'a'.repeat(40000) } });
  if (long.status !== 431) {
    fault('a long head', '431 expected, got', long.status);
  }
  const accepted = ['range-leaves-joint'];
  await good('accept a warning', 'POST', '/v1/mechanisms/wide/revisions/1/publish',
    { body: { accept: accepted, reason: '' } });
}

// A daemon with tokens: who may do what.
async function tokens() {
  const guarded = new Daemon();
  const query = guarded.token('plc', 'query');
  const author = guarded.token('office', 'author');
  const header = (token) => ({ headers: { Authorization: `Bearer ${token}` } });
  try {
    await guarded.start();
    const list = ['GET', '/v1/mechanisms'];
    const flap = ['PUT', '/v1/mechanisms/flap'];
    const publish = ['POST', '/v1/mechanisms/flap/revisions/1/publish'];
    for (const [title, [method, target], request, status, code] of [
      ['no token', list, {}, 401, 1011], ['a bad token', list, header('x'.repeat(64)), 401, 1012],
      ['no bearer', list, { headers: { Authorization: 'Basic eDp4' } }, 401, 1012],
      ['a good token', list, header(query), 200],
      ['open to all', ['GET', '/about'], {}, 200], ['a query token stores', flap,
        { body: demoFlap(), ...header(query) }, 403, 1013],
      ['an author stores', flap, { body: demoFlap(), ...header(author) }, 201],
      ['an author publishes', publish, header(author), 403, 1013],
    ]) {
      const answer = await ask(title, method, target, request, guarded);
      codes.add(answer.json?.code);
      if (answer.status !== status || (code && answer.json?.code !== code)) {
        fault(title, `${status} ${code ?? ''} expected, got`, answer.status, answer.text);
      }
    }
  } finally {
    await guarded.stop();
  }
}

function coverage() {
  for (const at of description.operations) {
    const label = `${at.method.toUpperCase()} ${at.path}`;
    Object.keys(at.operation.responses).filter((status) => status < '400')
      .filter((status) => !description.seen.has(`${at.method} ${at.path} ${status}`))
      .forEach((status) => fault(label, `no answer had the described status ${status}`));
    at.parameters.filter((p) => p.in === 'query' && !at.names.has(p.name))
      .forEach((p) => fault(label, `no good request used the query member ${p.name}`));
  }
}

async function main() {
  daemon = new Daemon();
  try {
    await daemon.start();
    const served = await daemon.ask('GET', '/openapi.json');
    description = new Description(JSON.parse(served.text));
    if (served.text !== readFileSync(file, 'utf8') && !renew) {
      fault('/openapi.json', 'is not the file of the checkout; build the daemon anew');
    }
    for (const name of DEMO) {
      await load(demo(name));
    }
    const about = await good('about', 'GET', '/about');
    if (about.json.version !== description.document.info.version) {
      fault('info/version', 'is not that of the daemon,', about.json.version);
    }
    await examples();
    await questions();
    await spare();
    await catalog();
    await heads();
    await refused();
    await tokens();
    coverage();
    checkRoutes(description, fault);
    await checkProblems(description, (...request) => good(...request), codes, not_here, fault);
    await checkBlindness(description, daemon, fault);
    await checkAgreement(description, ask, fault);
  } finally {
    await daemon.stop();
  }
  if (renew) {
    writeFileSync(file, format(description.document));
  }
}

// What was found is told even where a fault ended the run.
const began = Date.now();
await main().catch((error) => fault('the check itself', error.stack));
faults.forEach((text) => console.log(`  FAULT ${text}`));
console.log(`${count} requests in ${((Date.now() - began) / 1000).toFixed(1)} s, `
  + `${faults.length} faults`);
process.exitCode = faults.length === 0 ? 0 : 1;
