// The running server against its own description (schema/openapi.json) and the standards it follows.
import assert from 'node:assert/strict';
import { execFileSync, spawnSync } from 'node:child_process';
import { readFileSync } from 'node:fs';
import http from 'node:http';
import { join } from 'node:path';
import { after, before, describe, test } from 'node:test';
import Ajv2020 from 'ajv/dist/2020.js';
import { demo, index, program, serve, source } from './service.mjs';

const description = JSON.parse(readFileSync(join(source, 'schema', 'openapi.json'), 'utf8'));
const ajv = new Ajv2020({ strict: false });
ajv.addSchema(description, 'description');

/** Fails with what is wrong when `value` is not as the schema `name` says. */
function follows(name, value) {
  const holds = ajv.validate({ $ref: `description#/components/schemas/${name}` }, value);
  assert.ok(holds, `${name}: ${ajv.errorsText()}`);
}

let place, service, view, run, digest;
const get = (path, headers = {}) => fetch(service.url + path, { headers });
const json = async (path) => (await get(path)).json();

before(async () => {
  place = demo();
  index(place);
  service = await serve(place);
  view = (await json('/v1/views?limit=1')).items[0].id;
  run = (await json('/v1/runs?limit=1')).items[0].id;
  digest = (await json(`/v1/views/${view}/statistics`)).provenance.digest;
});
after(async () => {
  await service.close();
  place.remove();
});

test('the description in the repository is the one the program prints', () => {
  assert.equal(execFileSync(program, ['describe'], { encoding: 'utf8' }), readFileSync(join(source, 'schema', 'openapi.json'), 'utf8'));
});

describe('every path answers as it is described', () => {
  for (const [path, operations] of Object.entries(description.paths)) {
    if (!operations.get) continue;
    const operation = operations.get;
    const queries = [''];
    for (const parameter of operation.parameters ?? []) {
      if (parameter.in !== 'query' || ['from', 'to', 'first', 'last', 'band', 'array'].includes(parameter.name)) continue;
      const values = [parameter.example, parameter.schema.default, ...(parameter.schema.enum ?? [])];
      for (const value of new Set(values.filter((each) => each !== undefined))) {
        if (parameter.name !== 'format') queries.push(`${parameter.name}=${encodeURIComponent(value)}`);
      }
    }
    if (operation.parameters?.some(({ name }) => name === 'first')) queries.push('first=5&last=99', 'from=0.001&to=0.005', 'aperture=50%25&center=0.01,0');

    test(path, async () => {
      const filled = path.replace('{view}', view).replace('{run}', run).replace('{digest}', digest).replace('{job}', digest);
      for (const query of queries) {
        if (path.endsWith('/events')) break;
        const reply = await get(`${filled}?${query}`);
        assert.equal(reply.status, 200, `${filled}?${query}: ${reply.status} ${await reply.clone().text()}`);
        const schema = operation.responses['200'].content?.['application/json']?.schema?.$ref?.split('/').at(-1);
        if (schema) follows(schema, await reply.json());
      }
    });
  }
});

test('every result comes in four encodings, each with its media type', async () => {
  const types = { json: 'application/json', csv: 'text/csv', npy: 'application/', hdf5: 'application/x-hdf5' };
  for (const analysis of ['statistics', 'series', 'frames']) {
    for (const [format, type] of Object.entries(types)) {
      const array = format === 'npy' ? { statistics: '&array=rms_map', series: '&array=mean', frames: '&array=frames' }[analysis] : '';
      const reply = await get(`/v1/views/${view}/${analysis}?format=${format}${array}`);
      assert.equal(reply.status, 200);
      assert.ok(reply.headers.get('content-type').startsWith(type), `${analysis} ${format}: ${reply.headers.get('content-type')}`);
      const bytes = Buffer.from(await reply.arrayBuffer());
      if (format === 'npy') assert.equal(bytes.subarray(1, 6).toString(), 'NUMPY');
      if (format === 'hdf5') assert.equal(bytes.subarray(1, 4).toString(), 'HDF');
    }
  }
});

test('the Accept header chooses as well as format does', async () => {
  const reply = await get(`/v1/views/${view}/series?bins=4`, { accept: 'text/csv;q=0.9, application/json;q=0.1' });
  assert.ok(reply.headers.get('content-type').startsWith('text/csv'));
  assert.equal((await get(`/v1/views/${view}/series`, { accept: 'image/png' })).status, 406);
});

// RFC 9457: problem details with a stable code, the parameter at fault, and what would be accepted.
describe('every bad question is answered with a problem that says how to mend it', () => {
  const cases = {
    'statistics?nonsense=1': [400, 'unknown-parameter', 'nonsense'],
    'statistics?length_unit=furlong': [400, 'bad-parameter', 'length_unit'],
    'statistics?remove=coma': [400, 'bad-parameter', 'remove'],
    'statistics?first=600': [400, 'empty-window', 'first'],
    'statistics?from=5': [400, 'empty-window', 'from'],
    'statistics?first=10&last=9': [400, 'empty-window', 'first'],
    'statistics?from=0&first=3': [400, 'bad-parameter', 'first'],
    'statistics?aperture=3': [400, 'aperture-outside-mask', 'aperture'],
    'statistics?center=0.2,0': [400, 'aperture-outside-mask', 'aperture'],
    'statistics?aperture=0.001': [400, 'degenerate-aperture', 'aperture'],
    'statistics?level=2': [400, 'bad-parameter', 'level'],
    'statistics?band=100,200': [422, 'unsupported-preparation', 'band'],
    'statistics?remove=mean&remove=tilt': [400, 'bad-parameter', 'remove'],
    'series?quantity=signal:nobody': [400, 'bad-parameter', 'quantity'],
    'series?quantity=point:0:0': [400, 'bad-parameter', 'quantity'],
    'series?bins=many': [400, 'bad-parameter', 'bins'],
    'statistics?format=npy': [406, 'unsupported-encoding'],
    'statistics?format=npy&array=nobody': [400, 'bad-parameter', 'array'],
    'wisdom': [404, 'unknown-analysis'],
  };
  for (const [question, [status, code, parameter]] of Object.entries(cases)) {
    test(question, async () => {
      const reply = await get(`/v1/views/${view}/${question}`);
      const problem = await reply.json();
      assert.equal(reply.status, status, JSON.stringify(problem));
      assert.equal(reply.headers.get('content-type'), 'application/problem+json');
      follows('Problem', problem);
      assert.equal(problem.code, code);
      if (parameter) assert.equal(problem.parameter, parameter);
    });
  }
  const elsewhere = {
    '/v1/views/nobody/statistics': [404, 'unknown-view'],
    '/v1/views/nobody': [404, 'unknown-view'],
    '/v1/runs/nobody/field-of-regard': [404, 'unknown-run'],
    [`/v1/results/${'0'.repeat(32)}`]: [404, 'unknown-result'],
    '/v1/jobs/nobody': [404, 'unknown-job'],
    '/v1/nothing': [404, 'unknown-route'],
    '/v1/views?mach=fast': [400, 'bad-parameter'],
    '/v1/views?sort=beauty': [400, 'bad-parameter'],
    '/v1/views?limit=0': [400, 'bad-parameter'],
    '/../../etc/passwd': [404, 'unknown-route'],
    '/source/%2e%2e/%2e%2e/README.md': [404, 'unknown-route'],
  };
  for (const [path, [status, code]] of Object.entries(elsewhere)) {
    test(path, async () => {
      const reply = await get(path);
      const problem = await reply.json();
      assert.equal(reply.status, status, JSON.stringify(problem));
      assert.equal(problem.code, code);
    });
  }
  test('a method that is not used, too many parameters, too long an address', async () => {
    assert.equal((await fetch(service.url + '/v1/views', { method: 'POST', body: '{}' })).status, 405);
    const many = Array.from({ length: 80 }, (_, i) => `p${i}=1`).join('&');
    assert.equal((await get(`/v1/views?${many}`)).status, 413);
    assert.ok([400, 413, 414, 431].includes((await get(`/v1/views?run=${'x'.repeat(20000)}`)).status));
  });
});

// RFC 9110, 13.1.2 and 15.4.5.
test('a client that holds the bytes is told so, and gets none', async () => {
  const path = `/v1/views/${view}/statistics`;
  const tag = (await get(path)).headers.get('etag');
  for (const held of [tag, `W/${tag}`, `"other", ${tag}`, '*']) {
    const reply = await get(path, { 'if-none-match': held });
    assert.equal(reply.status, 304, held);
    assert.equal((await reply.text()).length, 0);
    assert.equal(reply.headers.get('etag'), tag);
  }
  assert.equal((await get(path, { 'if-none-match': '"other"' })).status, 200);
  const list = (await get('/v1/views')).headers.get('etag');
  assert.equal((await get('/v1/views', { 'if-none-match': list })).status, 304);
});

test('equal questions have one digest, however they are written', async () => {
  const base = `/v1/views/${view}/statistics`;
  const digests = new Set();
  for (const query of ['', '?remove=mean,tilt,piston', '?first=0&last=599', '?obscuration=0.0&level=.95', '?remove=modes:3,mean']) {
    digests.add((await json(base + query)).provenance.digest);
  }
  assert.equal(digests.size, 1);
});

test('a permalink gives the same bytes as the question, and stays for good', async () => {
  const first = await get(`/v1/views/${view}/statistics`);
  const later = await get(`/v1/results/${digest}`);
  assert.equal(await later.text(), await first.text());
  assert.match(later.headers.get('cache-control'), /immutable/);
});

// RFC 8288.
test('paging by Link walks every view exactly once', async () => {
  const seen = [];
  let path = '/v1/views?limit=3&sort=-opd_rms_mean_m';
  while (path) {
    const reply = await get(path);
    const page = await reply.json();
    seen.push(...page.items.map(({ id }) => id));
    assert.equal(reply.headers.get('link') !== null, page.next !== null);
    path = page.next;
  }
  assert.equal(seen.length, 8);
  assert.equal(new Set(seen).size, 8);
});

test('ranges filter lists', async () => {
  const { items } = await json('/v1/views?azimuth_deg=100..&source=tunnel');
  assert.ok(items.length > 0);
  for (const item of items) assert.ok(item.azimuth_deg >= 100 && item.source === 'tunnel');
});

test('the page comes with its policy, and its library', async () => {
  const page = await get('/');
  assert.equal(page.status, 200);
  assert.match(page.headers.get('content-security-policy'), /default-src 'none'; script-src 'self'/);
  assert.equal((await get('/vendor/uPlot.esm.js')).status, 200);
});

test('text is compressed for those who take it, HEAD has no body', async () => {
  const reply = await get(`/v1/views/${view}/statistics`, { 'accept-encoding': 'gzip' });
  assert.equal(reply.headers.get('content-encoding'), 'gzip');
  JSON.parse(await reply.text());
  const head = await fetch(`${service.url}/v1/views/${view}/statistics`, { method: 'HEAD' });
  assert.equal(head.status, 200);
  assert.equal((await head.text()).length, 0);
});

test('metrics are OpenMetrics text', async () => {
  const reply = await get('/metrics');
  assert.match(reply.headers.get('content-type'), /^application\/openmetrics-text/);
  const lines = (await reply.text()).trimEnd().split('\n');
  assert.equal(lines.at(-1), '# EOF');
  for (const line of lines.slice(0, -1)) {
    assert.match(line, /^(# (TYPE|HELP|UNIT) [a-z_]+ .+|[a-z_]+(\{[^{}]*\})? [0-9.e+-]+)$/);
  }
});

test('a job is remembered and tells its end by an event', async () => {
  const fresh = await json(`/v1/views/${view}/statistics?aperture=70%25`);
  const id = fresh.provenance.digest;
  const job = await json(`/v1/jobs/${id}`);
  follows('Job', job);
  assert.equal(job.state, 'done');
  const events = await (await get(`/v1/jobs/${id}/events`)).text();
  assert.match(events, /^event: done\ndata: \{/);
});

test('equal questions asked at once are computed once', async () => {
  const before = (await (await get('/metrics')).text()).match(/jobs_finished_total (\d+)/)[1];
  const replies = await Promise.all(Array.from({ length: 8 }, () => json(`/v1/views/${view}/statistics?aperture=65%25`)));
  assert.equal(new Set(replies.map((reply) => reply.provenance.digest)).size, 1);
  const after = (await (await get('/metrics')).text()).match(/jobs_finished_total (\d+)/)[1];
  assert.equal(Number(after) - Number(before), 1);
});

test('a client that sends half a request holds nobody up', async () => {
  const slow = [];
  for (let i = 0; i < 40; ++i) {
    const request = http.request(service.url + '/v1/views', { headers: { 'x-slow': 'yes' } });
    request.on('error', () => {});
    request.flushHeaders();
    slow.push(request);
  }
  const start = performance.now();
  assert.equal((await get('/health/ready')).status, 200);
  assert.ok(performance.now() - start < 4000);
  for (const request of slow) request.destroy();
});

describe('starting and stopping', () => {
  test('nothing is served beyond loopback', () => {
    const refused = spawnSync(program, ['serve', '--archive', place.archive, '--state', place.state + '-b', '--listen', '0.0.0.0:0'], { encoding: 'utf8' });
    assert.equal(refused.status, 2);
    assert.match(refused.stderr, /loopback/);
  });

  test('a second writer on one state folder is refused by name', () => {
    const refused = spawnSync(program, ['index', '--archive', place.archive, '--state', place.state], { encoding: 'utf8' });
    assert.equal(refused.status, 1);
    assert.match(refused.stderr, new RegExp(`process ${service.child.pid} writes`));
  });

  test('a second reader serves beside the first', async () => {
    const reader = await serve(place, '--reader');
    assert.equal((await fetch(`${reader.url}/v1/results/${digest}`)).status, 200);
    assert.deepEqual(await reader.close(), { status: 0, signal: null });
  });

  test('SIGTERM ends it cleanly, kill -9 loses nothing', async () => {
    await service.close('SIGKILL');
    service = await serve(place);
    assert.equal((await json('/v1/index')).views, 8);
    assert.equal((await get(`/v1/results/${digest}`)).status, 200);
    const start = performance.now();
    assert.deepEqual(await service.close(), { status: 0, signal: null });
    assert.ok(performance.now() - start < 8000);
    service = await serve(place);
  });
});
