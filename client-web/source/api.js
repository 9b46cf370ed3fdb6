// The only module that fetches. Problem documents become ApiError, a silent line becomes ConnectionError, and long work
// is followed to its end.

/** The server understood and refused: what, why, and what it would accept (RFC 9457 with the project's own members). */
export class ApiError extends Error {
  constructor({ status = 0, title = '', detail = '', code = 'unknown', parameter = null, accepted = [] }) {
    super(detail || title || `the server answered ${status}`);
    Object.assign(this, { name: 'ApiError', status, code, parameter, accepted: [].concat(accepted ?? []) });
  }
}

/** No answer, or one that asks to come again. `retryAfter` in seconds, when the server said so. */
export class ConnectionError extends Error {
  constructor(message, retryAfter = null) {
    super(message);
    Object.assign(this, { name: 'ConnectionError', retryAfter });
  }
}

/**
 * @typedef {{value: number, unit: string, low?: number, high?: number, level?: number}} Value
 * @typedef {{shape: number[], unit: string, axes: string[], data: (?number)[]}} ResultArray
 * @typedef {{analysis: string, subject: string, values: Object<string, Value>, arrays: Object<string, ResultArray>,
 *            warnings: {code: string, text: string}[], provenance: object}} Result
 * @typedef {{result: Result, path: string, digest: ?string}} Answer  path: the question's address, host left out
 * @typedef {{job: string, state: string, progress: number, url: string, events: string, bytes_read?: number,
 *            bytes_total?: number, seconds_left?: ?number, result?: string, problem?: object}} Job
 */

const keptAnswers = 32;
const pollMilliseconds = 1000;

/** "/v1/views/a/series?bins=400": only what was given, in the order given. */
export function address(path, parameters = {}) {
  const query = Object.entries(parameters)
    .filter(([, value]) => value !== null && value !== undefined && value !== '')
    .map(
      ([name, value]) =>
        `${name}=${encodeURIComponent(value).replace(/%(2C|3A)/g, (code) => decodeURIComponent(code))}`,
    );
  return query.length ? `${path}?${query.join('&')}` : path;
}

const segment = (id) => encodeURIComponent(id);

async function problemOf(response) {
  const retryAfter = Number(response.headers.get('Retry-After')) || null;
  let problem = {};
  try {
    problem = await response.json();
  } catch {
    // Not from the service itself: a proxy, say. Status alone has to do.
  }
  if (response.status === 503 || response.status === 502 || response.status === 504) {
    return new ConnectionError(problem.detail ?? `the server answered ${response.status}`, retryAfter ?? 3);
  }
  return new ApiError({ status: response.status, ...problem });
}

async function request(path, { signal, method = 'GET', headers = {} } = {}) {
  let response;
  try {
    response = await fetch(path, { method, signal, headers });
  } catch (error) {
    if (error.name === 'AbortError') throw error;
    throw new ConnectionError('the server does not answer');
  }
  if (!response.ok) throw await problemOf(response);
  return response;
}

async function json(path, options) {
  const response = await request(path, options);
  try {
    return { status: response.status, body: await response.json(), headers: response.headers };
  } catch (error) {
    if (error.name === 'AbortError') throw error;
    throw new ConnectionError('the answer broke off');
  }
}

/** Items of a list, following `next` until `limit` of them are there. */
async function items(path, { signal, limit = 20000 } = {}) {
  const all = [];
  for (let next = path; next && all.length < limit;) {
    const { body } = await json(next, { signal });
    all.push(...body.items);
    next = body.next;
  }
  return all;
}

const digestOf = (headers) => /<\/v1\/results\/([0-9a-f]+)>/.exec(headers.get('Link') ?? '')?.[1] ?? null;

/** Ends a job's waiting: resolves with its last state, rejects with what the server said or when `signal` aborts. */
function finished(job, { signal, onProgress }) {
  return new Promise((resolve, reject) => {
    const source = new EventSource(job.events);
    let timer = null;
    const stop = (settle, value) => {
      source.close();
      clearTimeout(timer);
      signal?.removeEventListener('abort', abort);
      settle(value);
    };
    const abort = () => stop(reject, new DOMException('superseded', 'AbortError'));
    const settle = (state) => {
      if (state.state === 'done') stop(resolve, state);
      else if (state.state === 'failed')
        stop(reject, new ApiError(state.problem ?? { code: 'internal', detail: 'the work failed' }));
      else if (state.state === 'cancelled')
        stop(reject, new ApiError({ code: 'cancelled', detail: 'the work was cancelled' }));
      else onProgress?.(state);
    };
    const hear = (event) =>
      settle({ ...JSON.parse(event.data), state: event.type === 'progress' ? 'running' : event.type });
    for (const name of ['progress', 'done', 'failed', 'cancelled']) source.addEventListener(name, hear);
    // A proxy may hold back events; the job's own address tells the same more slowly.
    const poll = async () => {
      try {
        const { body } = await json(job.url, { signal });
        settle(body);
        if (!['done', 'failed', 'cancelled'].includes(body.state)) timer = setTimeout(poll, pollMilliseconds);
      } catch (error) {
        stop(reject, error);
      }
    };
    source.onerror = () => {
      source.close();
      timer ??= setTimeout(poll, pollMilliseconds);
    };
    if (signal?.aborted) abort();
    else signal?.addEventListener('abort', abort);
  });
}

/** One connection to the service that served this page. */
export function createApi() {
  /** @type {Map<string, Answer>} */
  const kept = new Map();
  /** Questions under way, by address, each with those who wait for it. */
  const running = new Map();

  function keep(path, answer) {
    kept.delete(path);
    kept.set(path, answer);
    if (kept.size > keptAnswers) kept.delete(kept.keys().next().value);
    return answer;
  }

  async function askOnce(path, entry) {
    const { signal } = entry.controller;
    const tell = (job) => {
      entry.job = job;
      for (const listener of entry.listeners) listener(job);
    };
    let reply = await json(path, { signal });
    if (reply.status === 202) {
      tell(reply.body);
      const end = await finished(reply.body, { signal, onProgress: tell });
      reply = await json(end.result ?? path, { signal });
      if (reply.status === 202) throw new ConnectionError('the result is being made anew', 1);
    }
    return keep(path, { result: reply.body, path, digest: reply.body.provenance?.digest ?? digestOf(reply.headers) });
  }

  function entryFor(path) {
    const before = running.get(path);
    if (before) return before;
    const entry = { controller: new AbortController(), waiting: 0, listeners: new Set(), job: null };
    entry.promise = askOnce(path, entry).finally(() => running.get(path) === entry && running.delete(path));
    entry.promise.catch(() => {}); // everybody who waited may have left
    running.set(path, entry);
    return entry;
  }

  /**
   * Answer of an analysis. Equal questions asked at the same time are one request; it is given up when the last of
   * those who wait has left.
   *
   * @param {string} path      as from address()
   * @param {{signal: AbortSignal, onProgress?: (job: Job) => void}} options
   * @returns {Promise<Answer>}
   */
  function answer(path, { signal, onProgress }) {
    const held = kept.get(path);
    if (held) return Promise.resolve(keep(path, held));
    const entry = entryFor(path);
    entry.waiting += 1;
    if (onProgress) entry.listeners.add(onProgress);
    if (onProgress && entry.job) onProgress(entry.job);
    return new Promise((resolve, reject) => {
      const leave = () => {
        entry.listeners.delete(onProgress);
        entry.waiting -= 1;
        if (entry.waiting === 0 && running.get(path) === entry) {
          running.delete(path);
          entry.controller.abort();
        }
        reject(new DOMException('superseded', 'AbortError'));
      };
      if (signal.aborted) return leave();
      signal.addEventListener('abort', leave, { once: true });
      entry.promise.then(resolve, reject).finally(() => signal.removeEventListener('abort', leave));
    });
  }

  /** Bytes of one array as NPY. */
  async function npy(path, { signal, onProgress }) {
    let response = await request(path, { signal });
    if (response.status === 202) {
      const job = await response.json();
      onProgress?.(job);
      await finished(job, { signal, onProgress });
      response = await request(path, { signal });
      if (response.status === 202) throw new ConnectionError('the result is being made anew', 1);
    }
    try {
      return { buffer: await response.arrayBuffer(), digest: digestOf(response.headers) };
    } catch (error) {
      if (error.name === 'AbortError') throw error;
      throw new ConnectionError('the answer broke off');
    }
  }

  return {
    answer,
    npy,
    campaigns: (options) => items('/v1/campaigns?limit=500', options),
    runs: (campaign, options) => items(address('/v1/runs', { campaign, limit: 500 }), options),
    views: (run, options) => items(address('/v1/views', { run, limit: 500 }), options),
    /** The views with the greatest OPD_rms as indexed, greatest first. */
    worstViews: async (campaign, limit, options) =>
      (await json(address('/v1/views', { campaign, sort: '-opd_rms_mean_m', limit }), options)).body.items,
    run: async (id, options) => (await json(`/v1/runs/${segment(id)}`, options)).body,
    view: async (id, options) => (await json(`/v1/views/${segment(id)}`, options)).body,
    index: async (options) => (await json('/v1/index', options)).body,
    refusals: async (path, options) => (await json(path ?? '/v1/index/refusals?limit=100', options)).body,
    /** Stops work on the server, for everybody who waits for it. */
    cancel: (job) => request(job.url, { method: 'DELETE' }),
    /** Forgets answers: the archive has changed. */
    forget: () => kept.clear(),
    viewPath: (id, analysis) => `/v1/views/${segment(id)}/${analysis}`,
    runPath: (id, analysis) => `/v1/runs/${segment(id)}/${analysis}`,
  };
}
