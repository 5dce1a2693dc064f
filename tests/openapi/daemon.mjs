// SPDX-License-Identifier: GPL-3.0-or-later
// The daemon under check, started on a free port of the loopback with a catalog of its own, and one
// way to ask it. LEEWAYD names the program.
import { execFileSync, spawn } from 'node:child_process';
import { existsSync, mkdtempSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import http from 'node:http';
import { tmpdir } from 'node:os';
import { join } from 'node:path';

const START_MS = 30000;
const ANSWER_MS = 20000;
const STOP_MS = 20000;
const program = process.env.LEEWAYD;

export class Daemon {
  constructor(...options) {
    if (!program) {
      throw new Error('set LEEWAYD to the daemon that is to be checked');
    }
    this.dir = mkdtempSync(join(tmpdir(), 'leeway-openapi-'));
    this.options = options;
    this.agent = new http.Agent({ keepAlive: true, maxSockets: 1 });
    this.log = '';
  }

  // A token of this role: the token itself; its line goes to the token file.
  token(name, role) {
    const said = execFileSync(program, ['--make-token', name, role], { encoding: 'utf8' });
    const [, token, , line] = said.trim().split('\n');
    const file = join(this.dir, 'tokens');
    writeFileSync(file, `${line}\n`, { flag: 'a', mode: 0o600 });
    this.options = ['--token-file', file];
    return token;
  }

  async start() {
    const portFile = join(this.dir, 'port');
    const options = ['--data', this.dir, '--listen', '127.0.0.1:0', '--port-file', portFile];
    this.process = spawn(program, [...options, ...this.options],
      { stdio: ['ignore', 'ignore', 'pipe'] });
    this.ended = new Promise((done) => { this.process.on('exit', (code) => done(code)); });
    this.process.on('error', (error) => { this.log += error.message; this.failed = true; });
    this.process.stderr.on('data', (text) => { this.log += text; });
    const until = Date.now() + START_MS;
    while (!existsSync(portFile) || readFileSync(portFile, 'utf8') === '') {
      if (this.failed || this.process.exitCode !== null || Date.now() > until) {
        throw new Error(`the daemon does not start:\n${this.log}`);
      }
      await new Promise((next) => { setTimeout(next, 10); });
    }
    this.port = Number(readFileSync(portFile, 'utf8'));
  }

  // Exit status 0, and nothing said by a sanitizer.
  async stop() {
    this.agent.destroy();
    if (this.failed) {
      rmSync(this.dir, { recursive: true, force: true });
      return;
    }
    if (this.process && this.process.exitCode === null) {
      this.process.kill('SIGTERM');
      const late = setTimeout(() => this.process.kill('SIGKILL'), STOP_MS);
      await this.ended;
      clearTimeout(late);
    }
    rmSync(this.dir, { recursive: true, force: true });
    if (/Sanitizer|runtime error:/.test(this.log)) {
      throw new Error(`the sanitizer found something:\n${this.log.slice(-4000)}`);
    }
    if (this.process.exitCode !== 0) {
      throw new Error(`the daemon ended with ${this.process.exitCode}:\n${this.log.slice(-2000)}`);
    }
  }

  // One request; a body that is no text or buffer is sent as JSON.
  ask(method, target, { body, headers = {} } = {}) {
    const sent = body === undefined || typeof body === 'string' || Buffer.isBuffer(body)
      ? body : JSON.stringify(body);
    const all = { ...headers };
    if (sent !== undefined) {
      all['Content-Length'] = Buffer.byteLength(sent);
      all['Content-Type'] ??= 'application/json';
      if (all['Content-Type'] === 'none') {
        delete all['Content-Type'];
      }
    }
    return new Promise((done, fail) => {
      let answered = false;
      const request = http.request({
        host: '127.0.0.1', port: this.port, method, path: target, headers: all,
        agent: all.Expect || (sent !== undefined && sent.length > 60000) ? false : this.agent,
        timeout: ANSWER_MS,
      }, (answer) => {
        answered = true;
        const parts = [];
        answer.on('data', (part) => parts.push(part));
        answer.on('error', fail);
        answer.on('end', () => done({
          status: answer.statusCode, headers: answer.headers, text: Buffer.concat(parts).toString(),
        }));
      });
      request.on('timeout', () => request.destroy(new Error(`${method} ${target}: no answer`)));
      // A refused body may be cut off while it is still being sent; its answer is there all the
      // same.
      request.on('error', (error) => { if (!answered) { fail(error); } });
      request.end(sent);
    });
  }
}
