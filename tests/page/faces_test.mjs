// What stands where a plot would be when there is none. A healthy program does not fail on demand, so these faces are
// shown by a small server that answers what it is told to.

import { test, before, after, beforeEach, afterEach } from 'node:test';
import assert from 'node:assert/strict';
import { launch, openPage, settled } from './support/browser.mjs';
import { accessible } from './support/accessible.mjs';
import { problem, serveFake } from './support/fake.mjs';

const view = '/?run=wall-dome-tunnel&view=v-130-30';
let site, browser, opened, page;
/** Console lines about replies that these tests ask for; anything else is a complaint. */
const expected = /Failed to load resource|net::ERR/;

before(async () => {
  site = await serveFake();
  browser = await launch();
});
after(async () => {
  await browser.close();
  await site.close();
});
beforeEach(async () => {
  site.intercept = () => undefined;
  opened = await openPage(browser);
  page = opened.page;
});
afterEach(async () => {
  await opened.context.close();
  assert.deepEqual(
    opened.complaints.filter((text) => !expected.test(text)),
    [],
  );
});

test('a refusal says the code, the parameter and what would be accepted, at the plot and at the field', async () => {
  site.intercept = (url) =>
    url.searchParams.get('aperture') === '900%' && url.pathname.startsWith('/v1/views/')
      ? problem(400, 'aperture-outside-mask', 'aperture=900% reaches beyond the points of this view', {
          parameter: 'aperture',
          accepted: ['up to 100%'],
        })
      : undefined;
  await page.goto(site.url + view);
  await settled(page);

  await page.getByLabel('Diameter').fill('900');
  await page.getByRole('button', { name: 'Apply' }).click();

  const face = page.locator('[data-name=series] .face-refusal');
  await face.waitFor();
  assert.match(await face.innerText(), /Not possible[\s\S]*aperture=900%[\s\S]*up to 100%[\s\S]*aperture-outside-mask/);
  assert.match(await page.locator('.field-error').innerText(), /up to 100%/);
  assert.equal(
    await page.evaluate(() => document.activeElement.name),
    'aperture',
    'the field that must be mended has the focus',
  );
  assert.equal(
    await page.locator('[data-name=series] .picture').isVisible(),
    false,
    'no plot of another question stands there',
  );
  await accessible(page);
});

test('when the line is lost the old plot stays, greyed, and comes back by itself', async () => {
  await page.goto(site.url + view);
  await settled(page);

  site.intercept = (url) => (url.pathname.startsWith('/v1/views/') ? 'hang up' : undefined);
  await page.getByLabel('nm', { exact: true }).check({ force: true });

  const series = page.locator('[data-name=series]');
  await series.locator('.face-lost').waitFor();
  assert.match(await series.locator('.face-lost').innerText(), /Connection lost[\s\S]*last answer/);
  assert.ok((await series.getAttribute('class')).includes('is-stale'));
  assert.ok(await series.locator('canvas').isVisible());
  await accessible(page);

  site.intercept = () => undefined;
  await series.getByRole('button', { name: 'Try now' }).click();
  await series.locator('.face-lost').waitFor({ state: 'detached' });
  assert.ok(!(await series.getAttribute('class')).includes('is-stale'));
});

test('a busy server is asked again after the time it names', async () => {
  let refusals = 1;
  site.intercept = (url) =>
    url.pathname.endsWith('/series') && refusals-- > 0
      ? { ...problem(503, 'overloaded', 'all hands are busy'), headers: { 'Retry-After': '1' } }
      : undefined;
  await page.goto(site.url + view);

  const face = page.locator('[data-name=series] .face-lost');
  await face.waitFor();
  assert.match(await face.innerText(), /busy[\s\S]*every 1 s/);
  await face.waitFor({ state: 'detached', timeout: 5000 });
  assert.ok(await page.locator('[data-name=series] canvas').isVisible());
});

test('an archive without views says why and what to do', async () => {
  site.intercept = (url) =>
    ['/v1/campaigns', '/v1/runs'].includes(url.pathname) ? { body: '{"items":[],"next":null}' } : undefined;
  await page.goto(site.url);

  const face = page.locator('.face-empty');
  await face.waitFor();
  assert.match(await face.innerText(), /Nothing here yet[\s\S]*bentlight serve --archive/);
  await accessible(page);
});

test('a view that does not exist is said, with a way out', async () => {
  await page.goto(`${site.url}/?view=nowhere`);

  const face = page.locator('#failure .face-refusal');
  await face.waitFor();
  assert.match(await face.innerText(), /unknown-view/);
  await page.getByRole('link', { name: 'Show what the archive holds' }).click();
  await page.getByRole('heading', { name: 'What the archive holds' }).waitFor();
  await accessible(page);
});

/** A server whose statistics are long work: 202, then events as the test sends them. */
function longStatistics() {
  const job = {
    job: 'j1',
    analysis: 'statistics',
    state: 'running',
    progress: 0,
    done: 0,
    total: 4 * 1024 ** 3,
    url: '/v1/jobs/j1',
    events: '/v1/jobs/j1/events',
  };
  const seen = { stream: null, deleted: 0, isDone: false };
  seen.intercept = (url, request, response) => {
    if (url.pathname.endsWith('/statistics') && !seen.isDone)
      return { status: 202, body: JSON.stringify(job), headers: { Location: job.url } };
    if (url.pathname === '/v1/results/r1') return undefined;
    if (url.pathname === job.events) {
      response.writeHead(200, { 'Content-Type': 'text/event-stream', 'Cache-Control': 'no-store' });
      response.write(': hello\n\n');
      seen.stream = response;
      return 'handled';
    }
    if (url.pathname === job.url && request.method === 'DELETE') {
      seen.deleted += 1;
      seen.send('cancelled', {});
      return { status: 202, body: JSON.stringify(job) };
    }
    return undefined;
  };
  seen.send = (event, more) => seen.stream.write(`event: ${event}\ndata: ${JSON.stringify({ ...job, ...more })}\n\n`);
  return seen;
}

async function streamOf(seen) {
  while (!seen.stream) await new Promise((resolve) => setTimeout(resolve, 20));
}

test('long work shows how much is read and how long it takes, and ends in its result', async () => {
  const seen = longStatistics();
  site.intercept = seen.intercept;
  await page.goto(site.url + view);
  await streamOf(seen);

  seen.send('progress', { progress: 0.25, done: 1024 ** 3, seconds_left: 12 });
  const face = page.locator('.face-job');
  await face.getByText('1.00 GiB of 4.00 GiB, about 12 s left').waitFor();
  assert.equal(await face.locator('progress').evaluate((bar) => bar.value), 0.25);
  await accessible(page);

  seen.isDone = true;
  seen.send('done', { state: 'done', progress: 1, result: '/v1/views/v-130-30/statistics' });
  await face.waitFor({ state: 'detached' });
  assert.ok(await page.locator('[data-name=rms-map] canvas').isVisible());
});

test('cancel stops the work on the server and says so', async () => {
  const seen = longStatistics();
  site.intercept = seen.intercept;
  await page.goto(site.url + view);
  await streamOf(seen);

  await page.getByRole('button', { name: 'Cancel' }).click();

  await page.locator('.face-refusal').first().waitFor();
  assert.match(await page.locator('.face-refusal').first().innerText(), /Cancelled/);
  assert.equal(seen.deleted, 1);
});

test('work that failed shows the problem that the server names', async () => {
  const seen = longStatistics();
  site.intercept = seen.intercept;
  await page.goto(site.url + view);
  await streamOf(seen);

  seen.send('failed', {
    state: 'failed',
    problem: { status: 409, code: 'file-changed', detail: 'wall-dome/v.h5 changed since it was indexed' },
  });

  const face = page.locator('.face-refusal').first();
  await face.waitFor();
  assert.match(await face.innerText(), /changed since it was indexed[\s\S]*file-changed/);
});

test('a question that is superseded is given up, not drawn late', async () => {
  const held = [];
  site.intercept = (url, request, response) => {
    if (!url.pathname.endsWith('/series') || url.searchParams.get('quantity') !== 'tip') return undefined;
    held.push(request);
    request.on('close', () => (held.closed = true));
    return 'handled';
  };
  await page.goto(site.url + view);
  await settled(page);

  await page.getByLabel('Quantity').selectOption('tip');
  while (held.length === 0) await page.waitForTimeout(20);
  await page.getByLabel('Quantity').selectOption('tilt');

  await page.getByRole('heading', { name: 'Tilt against time' }).waitFor();
  assert.ok(held.closed, 'the request was aborted');
});

test('warnings stand at the plot they belong to', async () => {
  site.intercept = (url) => {
    if (!url.pathname.endsWith('/series')) return undefined;
    const array = (data, unit) => ({ shape: [2], unit, axes: ['time'], data });
    return {
      body: JSON.stringify({
        analysis: 'series',
        subject: 'v',
        values: {},
        arrays: {
          time: array([0, 1], 's'),
          frame: array([0, 50], 'frames'),
          low: array([1, 1], 'um'),
          mean: array([2, null], 'um'),
          high: array([3, 3], 'um'),
        },
        warnings: [{ code: 'missing-frames', text: '3 frames are missing' }],
        provenance: { preparation: { first: 0, last: 99 } },
      }),
    };
  };
  await page.goto(site.url + view);
  await settled(page);

  assert.match(await page.locator('[data-name=series] .warnings').innerText(), /3 frames are missing\. missing-frames/);
});

test('names from the archive are shown as text, whatever they hold', async () => {
  const evil = '<img src=x onerror="document.title=1"><b>bold';
  site.intercept = (url) =>
    url.pathname === '/v1/runs'
      ? {
          body: JSON.stringify({
            items: [{ id: 'e', name: evil, campaign: 'wall-dome', views: 1, source: evil }],
            next: null,
          }),
        }
      : undefined;
  await page.goto(site.url);

  await page.getByRole('link', { name: evil }).waitFor();
  assert.equal(await page.locator('main img, main b').count(), 0);
});

test('numbers that do not fit the page are left aside from the address, and said', async () => {
  await page.goto(`${site.url}${view}&zoom=5&colour=red`);
  await settled(page);

  assert.match(await page.locator('#notice').innerText(), /zoom=5[\s\S]*low\.\.high[\s\S]*colour=red/);
});
