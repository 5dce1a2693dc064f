// SPDX-License-Identifier: GPL-3.0-or-later
// The description as the daemon serves it, and what it says about requests and answers. Every
// schema is compiled twice: as it stands, and strictly, where an answer may hold no member that is
// not described (the description leaves answers open for later editions; this edition must be
// described whole).
import { require } from './modules.mjs';

const Ajv = require('ajv/dist/2020').default;
const addFormats = require('ajv-formats').default;

const ORDINARY = new Set(['date', 'content-length', 'content-type', 'connection', 'keep-alive']);
const METHODS = ['get', 'put', 'post', 'delete', 'patch', 'options', 'trace', 'head'];
const NOT_STRICT = new Set(['if', 'then', 'else', 'not', 'example', 'examples', 'const', 'enum']);

function closed(node, key) {
  if (Array.isArray(node)) {
    return node.map((child) => closed(child));
  }
  if (node === null || typeof node !== 'object' || NOT_STRICT.has(key)) {
    return node;
  }
  const copy = Object.fromEntries(Object.entries(node).map(([k, v]) => [k, closed(v, k)]));
  if (copy.type === 'object' && copy.properties && copy.additionalProperties === undefined) {
    copy.additionalProperties = false;
  }
  return copy;
}

const escaped = (text) => text.replaceAll('~', '~0').replaceAll('/', '~1');
const pointer = (...parts) => parts.map((part) => `/${encodeURIComponent(escaped(part))}`).join('');

export class Description {
  constructor(document) {
    this.document = document;
    this.ajv = new Ajv({ strict: false, validateSchema: false, allErrors: false });
    addFormats(this.ajv);
    this.ajv.addSchema(document, 'open');
    this.ajv.addSchema({ ...document, components: closed(document.components),
      paths: closed(document.paths) }, 'strict');
    this.compiled = new Map();
    this.operations = this.#operations();
    this.seen = new Map();
  }

  #operations() {
    const all = [];
    for (const [path, item] of Object.entries(this.document.paths)) {
      for (const method of METHODS.filter((m) => item[m])) {
        const operation = item[method];
        const parameters = [...(item.parameters ?? []).map((p, i) => ({ p, at: [String(i)] })),
          ...(operation.parameters ?? []).map((p, i) => ({ p, at: [method, String(i)] }))]
          .map(({ p }) => this.#resolve(p));
        const pattern = new RegExp(`^${path.replaceAll('.', '\\.').replace(/\{\w+\}/g, '[^/]+')}$`);
        all.push({ path, method, operation, parameters, pattern, names: new Set() });
      }
    }
    return all;
  }

  #resolve(node) {
    return node?.$ref ? node.$ref.slice(2).split('/')
      .reduce((at, part) => at[part.replaceAll('~1', '/').replaceAll('~0', '~')], this.document)
      : node;
  }

  // The errors of a value under the schema at a place of the document; null if there are none.
  errors(kind, place, value) {
    const id = `${kind}#${place}`;
    if (!this.compiled.has(id)) {
      this.compiled.set(id, this.ajv.compile({ $ref: id }));
    }
    const validate = this.compiled.get(id);
    return validate(value) ? null
      : validate.errors.map((e) => `${e.instancePath} ${e.message} ${JSON.stringify(e.params)}`)
        .slice(0, 6).join('\n      ');
  }

  find(method, target) {
    const path = target.split('?')[0];
    const wanted = method === 'HEAD' ? 'get' : method.toLowerCase();
    const fits = this.operations.filter((o) => o.method === wanted && o.pattern.test(path));
    return fits.find((o) => !o.path.includes('{')) ?? fits[0];
  }

  // Whether the described request body takes this one.
  request(at, body) {
    const place = pointer('paths', at.path, at.method, 'requestBody', 'content',
      'application/json', 'schema');
    return this.errors('open', place, body);
  }

  // Faults of the query members of a request; remembers which parameters were used.
  query(at, target) {
    const faults = [];
    const values = new URLSearchParams(target.split('?')[1] ?? '');
    for (const [name, text] of values) {
      const parameter = at.parameters.find((p) => p.in === 'query' && (p.name === name
        || Object.keys(p.schema.patternProperties ?? {}).some((k) => new RegExp(k).test(name)
          && !at.parameters.some((q) => q.name === name))));
      if (!parameter) {
        faults.push(`the query member ${name} is not described`);
        continue;
      }
      at.names.add(parameter.name);
      const number = text !== '' && Number.isFinite(Number(text)) ? Number(text) : text;
      const value = parameter.schema.type === 'object' ? { [name]: number } : number;
      const place = `/components/parameters/${Object.entries(this.document.components.parameters)
        .find(([, p]) => p === parameter)[0]}/schema`;
      const error = this.errors('open', place, value)
        && this.errors('open', place, typeof value === 'number' ? text : value);
      if (error) {
        faults.push(`the query member ${name}: ${error}`);
      }
    }
    return faults;
  }

  // Faults of an answer against what is described for this operation.
  answer(at, method, answer) {
    const status = String(answer.status);
    const described = at.operation.responses[status];
    if (!described) {
      return [`status ${status} is not described`];
    }
    this.seen.set(`${at.method} ${at.path} ${status}`, true);
    const place = described.$ref ? described.$ref.slice(1)
      : pointer('paths', at.path, at.method, 'responses', status);
    const response = this.#resolve(described);
    return [...this.#headers(response, answer), ...this.#body(response, place, method, answer)];
  }

  #headers(response, answer) {
    const faults = [];
    const described = Object.fromEntries(Object.entries(response.headers ?? {})
      .map(([name, header]) => [name.toLowerCase(), [name, this.#resolve(header)]]));
    for (const name of Object.keys(answer.headers)) {
      if (!described[name] && !ORDINARY.has(name)) {
        faults.push(`the header ${name} is not described for ${answer.status}`);
      }
    }
    for (const [lower, [name, header]] of Object.entries(described)) {
      const value = answer.headers[lower];
      if (value === undefined) {
        if (header.required) {
          faults.push(`the header ${name} is missing`);
        }
      } else {
        const error = this.errors('open', `/components/headers/${name}/schema`, value);
        if (error) {
          faults.push(`the header ${name} is ${value}: ${error}`);
        }
      }
    }
    return faults;
  }

  #body(response, place, method, answer) {
    const [type] = (answer.headers['content-type'] ?? '').split(';');
    const media = response.content?.[type];
    if (!media) {
      return type === '' && !response.content ? []
        : [`${type || 'no content type'} is not described for ${answer.status}`];
    }
    if (method === 'HEAD') {
      return answer.text === '' ? [] : ['an answer to HEAD has a body'];
    }
    let value = answer.text;
    if (type !== 'text/plain' && type !== 'text/csv') {
      try {
        value = JSON.parse(answer.text);
      } catch (error) {
        return [`the body is no JSON: ${error.message}`];
      }
    }
    const schema = `${place}${pointer('content', type, 'schema')}`;
    return ['open', 'strict'].map((kind) => [kind, this.errors(kind, schema, value)])
      .filter(([, error]) => error).map(([kind, error]) => `the body (${kind}): ${error}`);
  }
}
