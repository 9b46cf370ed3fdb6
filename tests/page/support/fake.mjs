// A small server that answers what it is told to: for faces that a healthy program does not show on demand (refusals,
// lost connections, long jobs). What it draws is synthetic; numbers are tested against the real program.

import { createServer } from 'node:http';
import { readFile } from 'node:fs/promises';
import path from 'node:path';
import { buildFolder, pageFolder } from './places.mjs';

// The server's own policy, so that a violation shows here as well.
const policy =
  "default-src 'none'; script-src 'self'; style-src 'self'; img-src 'self' data: blob:; connect-src 'self'; " +
  "base-uri 'none'; form-action 'none'; frame-ancestors 'none'; require-trusted-types-for 'script'; trusted-types 'none'";
const kinds = {
  '.html': 'text/html; charset=utf-8',
  '.css': 'text/css; charset=utf-8',
  '.js': 'text/javascript; charset=utf-8',
};

async function staticFile(name) {
  const root = name.startsWith('/vendor/') ? path.join(buildFolder, 'page') : pageFolder;
  const file = path.join(root, name === '/' ? 'index.html' : path.normalize(name));
  return { body: await readFile(file), type: kinds[path.extname(file)] ?? 'application/octet-stream' };
}

/** Numbers that look random and are the same every time. */
function noise(seed) {
  let state = seed >>> 0 || 1;
  return () => {
    state = (Math.imul(state, 1664525) + 1013904223) >>> 0;
    return state / 2 ** 32 - 0.5;
  };
}

const grid = 32,
  frames = 2000,
  rate = 50000;
const azimuths = [30, 55, 80, 105, 130, 155],
  elevations = [15, 30, 45, 60];
const viewId = (azimuth, elevation) => `v-${azimuth}-${elevation}`;

export const views = elevations.flatMap((elevation) =>
  azimuths.map((azimuth) => ({
    id: viewId(azimuth, elevation),
    campaign: 'wall-dome',
    run: 'wall-dome-tunnel',
    source: 'tunnel',
    azimuth_deg: azimuth,
    elevation_deg: elevation,
    frames,
    rows: grid,
    columns: grid,
    frame_rate_hz: rate,
    duration_s: frames / rate,
    aperture_diameter_m: 0.15,
    opd_rms_mean_m: 1e-7,
    checks:
      azimuth === 130 && elevation === 30
        ? [
            {
              code: 'dropped-frames',
              severity: 'warning',
              figure: 3,
              text: '3 frames are missing between 0.012 s and 0.013 s.',
            },
          ]
        : [],
  })),
);

const runs = ['tunnel', 'simulation'].map((name) => ({
  id: `wall-dome-${name}`,
  name: `wall-dome-${name}`,
  campaign: 'wall-dome',
  source: name,
  views: 24,
  azimuth_deg: { low: 30, high: 155 },
  elevation_deg: { low: 15, high: 60 },
  mach: 0.45,
}));

const axis = Array.from({ length: grid }, (_, i) => -0.075 + (0.15 * (i + 0.5)) / grid);
const inside = (x, y) => x * x + y * y <= 0.075 ** 2;
const mapOf = (value) => axis.flatMap((y) => axis.map((x) => (inside(x, y) ? value(x, y) : null)));
const array = (data, unit, axes, shape = [data.length]) => ({ shape, unit, axes, data });
const strength = ({ azimuth_deg: azimuth }) => 0.05 + 0.2 / (1 + Math.exp((105 - azimuth) / 12));

const result = (analysis, subject, values, arrays, more = {}) => ({
  analysis,
  subject,
  values,
  arrays,
  warnings: more.warnings ?? [],
  provenance: {
    digest: 'f'.repeat(32),
    preparation: { first: 0, last: frames - 1 },
    frames: { count: frames },
    ...more.provenance,
  },
});

function statistics(view) {
  const mean = strength(view);
  const edges = Array.from({ length: 31 }, (_, i) => mean * (0.4 + (1.2 * i) / 30));
  const density = (x) => Math.exp(-((Math.log(x / mean) / 0.22) ** 2) / 2) / x;
  const centres = edges.slice(1).map((edge, i) => (edge + edges[i]) / 2);
  const total = centres.reduce((sum, x) => sum + density(x), 0);
  const fit = centres.map((x) => (frames * density(x)) / total);
  const random = noise(view.azimuth_deg * 100 + view.elevation_deg);
  const count = fit.map((value) => Math.max(0, Math.round(value + random() * 2 * Math.sqrt(value))));
  const steps = Array.from({ length: 24 }, (_, i) => Math.round((frames * (i + 1)) / 24));
  const wander = steps.map((step) => mean * (1 + (random() * 0.4) / Math.sqrt(step / 50)));
  return result(
    'statistics',
    view.id,
    {
      opd_rms_mean: { value: mean, unit: 'um', low: mean * 0.96, high: mean * 1.04, level: 0.95 },
      opd_rms_std: { value: mean * 0.21, unit: 'um' },
      opd_rms_overall: { value: mean * 1.02, unit: 'um' },
      effective_samples: { value: 142.7, unit: '1' },
      skewness: { value: 0.71, unit: '1' },
      kurtosis: { value: 3.9, unit: '1' },
      lognormal_median: { value: mean, unit: 'um' },
      lognormal_sigma: { value: 0.22, unit: '1' },
      lognormal_ks_distance: { value: 0.018, unit: '1' },
    },
    {
      x: array(axis, 'm', ['x']),
      y: array(axis, 'm', ['y']),
      mean_map: array(
        mapOf((x, y) => mean * 4 * ((2 * (x * x + y * y)) / 0.0056 - 1 + 9 * x)),
        'um',
        ['y', 'x'],
        [grid, grid],
      ),
      rms_map: array(
        mapOf((x, y) => mean * (0.75 + 60 * (x + 0.02) ** 2 + 40 * y * y)),
        'um',
        ['y', 'x'],
        [grid, grid],
      ),
      percent: array([5, 25, 50, 75, 95], '%', ['percent']),
      percentiles: array(
        [0.7, 0.85, 0.98, 1.12, 1.4].map((k) => k * mean),
        'um',
        ['percent'],
      ),
      histogram_low: array(edges.slice(0, -1), 'um', ['histogram_low']),
      histogram_high: array(edges.slice(1), 'um', ['histogram_low']),
      histogram_count: array(count, '1', ['histogram_low']),
      lognormal_count: array(fit, '1', ['histogram_low']),
      convergence_frames: array(steps, '1', ['convergence_frames']),
      convergence_mean: array(wander, 'um', ['convergence_frames']),
      convergence_low: array(
        wander.map((value, i) => value - (mean * 0.5) / Math.sqrt(steps[i] / 14)),
        'um',
        ['convergence_frames'],
      ),
      convergence_high: array(
        wander.map((value, i) => value + (mean * 0.5) / Math.sqrt(steps[i] / 14)),
        'um',
        ['convergence_frames'],
      ),
    },
  );
}

function series(view, query) {
  const from = Number(query.get('from') ?? 0),
    to = Number(query.get('to') ?? (frames - 1) / rate);
  const count = Math.min(Number(query.get('bins') ?? 400), Math.max(2, Math.round((to - from) * rate)));
  const random = noise(7),
    mean = strength(view);
  const time = Array.from({ length: count }, (_, i) => from + ((to - from) * (i + 0.5)) / count);
  const middle = time.map((t) => mean * (1 + 0.25 * Math.sin(900 * t) + 0.2 * Math.sin(3217 * t) + 0.3 * random()));
  const first = Math.round(from * rate),
    last = Math.round(to * rate);
  return result(
    'series',
    view.id,
    {},
    {
      time: array(time, 's', ['time']),
      frame: array(
        time.map((_, i) => first + Math.floor((i * (last - first + 1)) / count)),
        'frames',
        ['time'],
      ),
      mean: array(middle, 'um', ['time']),
      low: array(
        middle.map((value) => value * (0.86 - 0.06 * random())),
        'um',
        ['time'],
      ),
      high: array(
        middle.map((value) => value * (1.16 + 0.1 * random())),
        'um',
        ['time'],
      ),
    },
    { provenance: { preparation: { first, last } } },
  );
}

const frameOf = (view, k) =>
  mapOf(
    (x, y) =>
      strength(view) * 1.4 * Math.cos(80 * (x - k * 0.0024) + 2 * y) * Math.exp(-y * y * 90) +
      strength(view) * 0.6 * Math.sin(60 * y - 40 * (x - k * 0.0021)),
  );

function npy(data, shape, kind) {
  const header = `{'descr': '${kind}', 'fortran_order': False, 'shape': (${shape.join(', ')}${shape.length === 1 ? ',' : ''}), }`;
  const padded = header.padEnd(Math.ceil((header.length + 11) / 64) * 64 - 11) + '\n';
  const head = Buffer.alloc(10);
  head.write('\x93NUMPY', 'latin1');
  head[6] = 1;
  head.writeUInt16LE(padded.length, 8);
  return Buffer.concat([head, Buffer.from(padded, 'latin1'), Buffer.from(data.buffer)]);
}

function framesReply(view, query) {
  const first = Number(query.get('first') ?? 0),
    last = Number(query.get('last') ?? first);
  const count = last - first + 1;
  const time = Array.from({ length: count }, (_, i) => (first + i) / rate);
  if (query.get('format') === 'npy') {
    if (query.get('array') === 'time')
      return { type: 'application/x-npy', body: npy(Float64Array.from(time), [count], '<f8') };
    const data = new Float32Array(count * grid * grid);
    for (let k = 0; k < count; ++k)
      data.set(
        frameOf(view, first + k).map((value) => value ?? NaN),
        k * grid * grid,
      );
    return { type: 'application/x-npy', body: npy(data, [count, grid, grid], '<f4') };
  }
  return result(
    'frames',
    view.id,
    {},
    {
      frames: array(
        time.flatMap((_, i) => frameOf(view, first + i)),
        'um',
        ['time', 'y', 'x'],
        [count, grid, grid],
      ),
      time: array(time, 's', ['time']),
      frame: array(
        time.map((_, i) => first + i),
        'frames',
        ['time'],
      ),
      x: array(axis, 'm', ['x']),
      y: array(axis, 'm', ['y']),
    },
    { provenance: { preparation: { first, last } } },
  );
}

function fieldOfRegard(run, query) {
  const own = views.map((view) => ({ ...view, run }));
  const factor = run.endsWith('simulation') ? 0.9 : 1;
  const unit = /opd/.test(query.get('quantity') ?? 'opd') ? 'um' : '1';
  const value = own.map((view) => strength(view) * factor * (1 + 0.004 * (view.elevation_deg - 30)));
  return result(
    'field-of-regard',
    run,
    {},
    {
      azimuth: array(
        own.map((v) => v.azimuth_deg),
        'deg',
        ['view'],
      ),
      elevation: array(
        own.map((v) => v.elevation_deg),
        'deg',
        ['view'],
      ),
      value: array(value, unit, ['view']),
      low: array(
        value.map((v) => v * 0.96),
        unit,
        ['view'],
      ),
      high: array(
        value.map((v) => v * 1.04),
        unit,
        ['view'],
      ),
    },
    { provenance: { views: own.map((view) => view.id) } },
  );
}

/** The reply to a request of the interface; undefined: nothing is there. */
function answerOf(url) {
  const { pathname, searchParams: query } = url;
  const [, , noun, id, analysis] = pathname.split('/').map(decodeURIComponent);
  if (noun === 'campaigns') return { items: [{ id: 'wall-dome', name: 'wall-dome', runs: 2, views: 48 }], next: null };
  if (noun === 'runs' && !id) return { items: runs, next: null };
  if (noun === 'runs' && !analysis) return runs.find((run) => run.id === id);
  if (noun === 'runs') return fieldOfRegard(id, query);
  if (noun === 'index' && id === 'refusals')
    return {
      items: [{ path: 'wall-dome/broken.h5', code: 'damaged-file', text: 'The file ends before its frames do.' }],
      next: null,
    };
  if (noun === 'index')
    return {
      state: 'idle',
      campaigns: 1,
      runs: 2,
      views: 48,
      missing: 0,
      refusals: 1,
      frames: 96000,
      bytes: 884736000,
      revision: 1,
    };
  if (noun === 'views' && !id) return { items: views, next: null };
  const view = views.find((each) => each.id === id);
  if (!view) return undefined;
  if (!analysis) {
    return {
      ...view,
      start_s: 0,
      points: 804,
      path: `wall-dome/${id}.h5`,
      signals: [{ name: 'wall_pressure', unit: 'Pa' }],
      analyses: [],
      conditions: {
        mach: 0.45,
        velocity_m_s: 153.2,
        density_kg_m3: 1.0668,
        wavelength_m: 532e-9,
        reference_length_m: 0.3,
        note: 'Invented for demonstration.',
      },
    };
  }
  return { statistics, series, frames: framesReply }[analysis]?.(view, query);
}

export const problem = (status, code, detail, more = {}) => ({
  status,
  type: 'application/problem+json',
  body: JSON.stringify({ type: `urn:bentlight:problem:${code}`, title: code, status, detail, code, ...more }),
});

/**
 * @param {(url: URL, request: import('node:http').IncomingMessage, response: import('node:http').ServerResponse) => *} intercept
 *        gives a reply of its own ({status, type, body}), 'handled' when it has answered by itself, 'hang up', or undefined
 */
export async function serveFake(intercept = () => undefined) {
  const state = { intercept };
  const server = createServer(async (request, response) => {
    const url = new URL(request.url, 'http://127.0.0.1');
    const special = state.intercept(url, request, response);
    if (special === 'handled') return;
    if (special === 'hang up') return request.socket.destroy();
    const send = ({ status = 200, type = 'application/json', body, headers = {} }) => {
      response.writeHead(status, {
        'Content-Type': type,
        'Content-Security-Policy': policy,
        'Cache-Control': 'no-cache',
        ...headers,
      });
      response.end(body);
    };
    if (special) return send(special);
    if (!url.pathname.startsWith('/v1/')) {
      return staticFile(url.pathname).then(send, () =>
        send(problem(404, 'unknown-route', `nothing is at ${url.pathname}`)),
      );
    }
    const answer = answerOf(url);
    if (answer === undefined) return send(problem(404, 'unknown-view', 'there is no such thing'));
    return send(answer.body ? answer : { body: JSON.stringify(answer) });
  });
  await new Promise((resolve) => server.listen(Number(process.env.PORT ?? 0), '127.0.0.1', resolve));
  return {
    url: `http://127.0.0.1:${server.address().port}`,
    /** Replaces what is intercepted from now on. */
    set intercept(next) {
      state.intercept = next;
    },
    close: () =>
      new Promise((resolve) => {
        server.closeAllConnections();
        server.close(resolve);
      }),
  };
}
