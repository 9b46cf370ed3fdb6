// The real program on a demo archive, for tests and pictures: written, indexed and served once per process.

import { spawn, execFileSync } from 'node:child_process';
import { existsSync, mkdtempSync, rmSync, writeFileSync, mkdirSync } from 'node:fs';
import { tmpdir } from 'node:os';
import path from 'node:path';
import { pageFolder, program } from './places.mjs';

const startMilliseconds = 30000;

/**
 * A served demo archive with one file in it that cannot be indexed.
 *
 * @param {{views?: number, frames?: number, grid?: number}} sizes
 * @returns {Promise<{url: string, folder: string, close: () => Promise<void>, stop: () => Promise<void>}>}
 *          stop() ends the program and keeps the folder
 */
export async function serve({ views = 24, frames = 2000, grid = 48 } = {}) {
  if (!existsSync(program))
    throw new Error(`there is no program at ${program}: build it, or name its folder in BENTLIGHT_BUILD`);
  const folder = mkdtempSync(path.join(tmpdir(), 'bentlight-page-'));
  const archive = path.join(folder, 'archive'),
    state = path.join(folder, 'state');
  execFileSync(
    program,
    ['demo', archive, '--views', String(views), '--frames', String(frames), '--grid', String(grid)],
    { stdio: 'ignore' },
  );
  mkdirSync(archive, { recursive: true });
  writeFileSync(path.join(archive, 'not_a_wavefront.h5'), 'This file says it is HDF5, and is not.');
  execFileSync(program, ['index', '--archive', archive, '--state', state], { stdio: 'ignore' });
  const child = spawn(program, ['serve', '--archive', archive, '--state', state, '--listen', '127.0.0.1:0'], {
    stdio: ['ignore', 'pipe', 'pipe'],
    cwd: path.dirname(pageFolder),
  });
  const ended = new Promise((resolve) => child.on('exit', resolve));
  const url = await addressOf(child, ended);
  const stop = async () => {
    child.kill('SIGTERM');
    await ended;
  };
  return {
    url,
    folder,
    stop,
    close: async () => {
      await stop();
      rmSync(folder, { recursive: true, force: true });
    },
  };
}

/** The address that the program prints once it serves. */
function addressOf(child, ended) {
  let said = '';
  return new Promise((resolve, reject) => {
    const timer = setTimeout(() => reject(new Error(`the program printed no address: ${said}`)), startMilliseconds);
    const hear = (bytes) => {
      said += bytes;
      const address = /http:\/\/127\.0\.0\.1:\d+/.exec(said);
      if (!address) return;
      clearTimeout(timer);
      resolve(address[0]);
    };
    child.stdout.on('data', hear);
    child.stderr.on('data', hear);
    ended.then((code) => reject(new Error(`the program ended with ${code}: ${said}`)));
  });
}
