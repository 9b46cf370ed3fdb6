// A real service on a small demo archive, for as long as a test file needs it.
import { spawn, execFileSync } from 'node:child_process';
import { mkdtempSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { dirname, join } from 'node:path';
import { fileURLToPath } from 'node:url';

export const source = join(dirname(fileURLToPath(import.meta.url)), '..', '..');
export const program = join(process.env.BENTLIGHT_BUILD ?? join(source, 'build'), 'bentlight');

/** A folder with a demo archive in it, and room for its state. */
export function demo() {
  const folder = mkdtempSync(join(tmpdir(), 'bentlight-contract-'));
  const archive = join(folder, 'archive');
  execFileSync(program, ['demo', archive, '--views', '4', '--frames', '600', '--grid', '24'], { stdio: 'ignore' });
  return { archive, state: join(folder, 'state'), remove: () => rmSync(folder, { recursive: true, force: true }) };
}

export function index({ archive, state }) {
  execFileSync(program, ['index', '--archive', archive, '--state', state], { stdio: 'ignore' });
}

/** Starts `bentlight serve` and waits for the address it prints. */
export async function serve({ archive, state }, ...options) {
  const child = spawn(program, ['serve', '--archive', archive, '--state', state, '--listen', '127.0.0.1:0', ...options],
    { stdio: ['ignore', 'pipe', 'pipe'] });
  let log = '';
  child.stderr.on('data', (text) => { log += text; });
  const ended = new Promise((resolve) => child.on('exit', (status, signal) => resolve({ status, signal })));
  const url = await new Promise((resolve, reject) => {
    let text = '';
    child.stdout.on('data', (piece) => {
      text += piece;
      const found = text.match(/http:\/\/\S+?(?=\/\s)/);
      if (found) resolve(found[0]);
    });
    ended.then(({ status }) => reject(new Error(`the service ended with ${status}: ${log}`)));
  });
  return {
    url,
    child,
    ended,
    log: () => log,
    async close(signal = 'SIGTERM') {
      child.kill(signal);
      return ended;
    },
  };
}
