// What can be taken away from a plot: numbers, pictures, and the call that made it.

import { test, before, after, beforeEach, afterEach } from 'node:test';
import assert from 'node:assert/strict';
import { execFileSync } from 'node:child_process';
import { readFileSync } from 'node:fs';
import { parseNpy } from '../../client-web/source/npy.js';
import { launch, openPage, settled } from './support/browser.mjs';
import { read, tunnelRun } from './support/reading.mjs';
import { serve } from './support/serve.mjs';

let site, browser, run, view, opened, page;

before(async () => {
  site = await serve({ views: 2, frames: 400, grid: 24 });
  browser = await launch();
  const found = await tunnelRun(site);
  run = found.run;
  view = found.views[0];
});
after(async () => {
  await browser?.close();
  await site?.close();
});
beforeEach(async () => {
  opened = await openPage(browser, {
    viewport: { width: 1440, height: 900 },
    permissions: ['clipboard-read', 'clipboard-write'],
  });
  page = opened.page;
  await page.goto(`${site.url}/?run=${run.id}&view=${view.id}`);
  await settled(page);
});
afterEach(async () => {
  await opened.context.close();
  assert.deepEqual(opened.complaints, []);
});

const figures = ['field-of-regard', 'series', 'frames', 'mean-map', 'rms-map', 'histogram', 'convergence'];

/** Presses one entry of a figure's menu and gives the file that comes. */
async function saved(figure, entry) {
  const plot = page.locator(`[data-name="${figure}"]`);
  await plot.locator('.save summary').click();
  const [download] = await Promise.all([
    page.waitForEvent('download'),
    plot.locator('.menu-items').getByText(entry, { exact: true }).click(),
  ]);
  return { name: download.suggestedFilename(), bytes: readFileSync(await download.path()) };
}

/** Columns of a CSV without quotes, below its lines of provenance. */
function columnsOf(text) {
  const lines = text.trim().split('\r\n'),
    rows = lines.filter((line) => !line.startsWith('#')).map((line) => line.split(','));
  return { comments: lines.filter((line) => line.startsWith('#')), head: rows[0], rows: rows.slice(1) };
}

test('the series as CSV has the numbers of the interface, with units and provenance', async () => {
  const { name, bytes } = await saved('series', 'CSV');
  const { comments, head, rows } = columnsOf(bytes.toString());
  const path = comments
    .find((line) => line.includes('http'))
    .slice(2)
    .replace(site.url, '');
  const { arrays, provenance } = await read(site, path);

  assert.match(name, new RegExp(`^${view.id}_series_${provenance.digest.slice(0, 8)}_opd_rms\\.csv$`));
  assert.ok(comments.some((line) => line.includes(provenance.digest)));
  assert.deepEqual(head, ['time (s)', 'low (um)', 'high (um)', 'mean (um)']);
  assert.deepEqual(
    rows.map((row) => Number(row[3])),
    arrays.mean.data,
  );
});

test('a map as CSV has a row for every point, and nothing where nothing is', async () => {
  const { arrays } = await read(site, `/v1/views/${view.id}/statistics`);
  const { rows } = columnsOf((await saved('rms-map', 'CSV')).bytes.toString());

  assert.deepEqual(
    rows.map((row) => (row[2] === '' ? null : Number(row[2]))),
    arrays.rms_map.data,
  );
});

test('copying puts the same CSV on the clipboard', async () => {
  const file = (await saved('histogram', 'CSV')).bytes.toString();
  await page.locator('[data-name=histogram] .save summary').click();
  await page.locator('[data-name=histogram]').getByText('Copy as CSV').click();
  await page.locator('[data-name=histogram] .readout', { hasText: 'Copied' }).waitFor();

  // The clipboard may turn ends of lines into the system's own.
  const plain = (text) => text.replaceAll('\r\n', '\n');
  assert.equal(plain(await page.evaluate(() => navigator.clipboard.readText())), plain(file));
});

test('every plot gives a PNG at twice its size, with its provenance inside and white behind, in the dark too', async () => {
  await page.getByLabel('Theme').selectOption('dark');
  for (const figure of figures) {
    const { bytes } = await saved(figure, 'PNG');

    assert.equal(bytes.toString('hex', 0, 8), '89504e470d0a1a0a', figure);
    assert.ok(bytes.readUInt32BE(16) >= 1000, `${figure} is ${bytes.readUInt32BE(16)} wide`);
    assert.ok(bytes.includes(Buffer.from('/v1/')), figure);
    const { corner, colours } = await page.evaluate(
      async (address) => {
        const image = new Image();
        image.src = address;
        await image.decode();
        const canvas = document.createElement('canvas');
        canvas.width = image.width;
        canvas.height = image.height;
        const context = canvas.getContext('2d');
        context.drawImage(image, 0, 0);
        const { data } = context.getImageData(0, 0, canvas.width, canvas.height);
        return { corner: [...data.subarray(0, 4)], colours: new Set(new Uint32Array(data.buffer)).size };
      },
      `data:image/png;base64,${bytes.toString('base64')}`,
    );
    assert.deepEqual(corner, [255, 255, 255, 255], figure);
    assert.ok(colours > 20, `${figure} holds ${colours} colours`);
  }
});

test('every plot gives an SVG that an XML parser takes, with its unit and provenance in it', async () => {
  for (const figure of figures) {
    const { name, bytes } = await saved(figure, 'SVG');
    const told = execFileSync(
      '/usr/bin/python3',
      [
        '-c',
        'import sys, xml.dom.minidom as m; d = m.parse(sys.stdin); print(d.documentElement.tagName, len(d.getElementsByTagName("path")))',
      ],
      { input: bytes },
    ).toString();

    assert.match(told, /^svg [1-9]/, figure);
    assert.ok(bytes.toString().includes('/v1/') && bytes.toString().includes('µm'), figure);
    assert.ok(!/style=|script/.test(bytes.toString()), figure);
    assert.match(name, /\.svg$/);
  }
});

test('the whole array comes from the server as NPY, and the whole result as HDF5', async () => {
  const { arrays } = await read(site, `/v1/views/${view.id}/statistics`);
  const npy = (await saved('rms-map', 'rms_map as NPY')).bytes;
  const { shape, data } = parseNpy(npy.buffer.slice(npy.byteOffset, npy.byteOffset + npy.byteLength));

  assert.deepEqual(shape, arrays.rms_map.shape);
  assert.deepEqual(
    [...data].map((value) => (Number.isNaN(value) ? null : value)),
    arrays.rms_map.data.map((value) =>
      value === null ? null : data instanceof Float32Array ? Math.fround(value) : value,
    ),
  );
  assert.equal((await saved('rms-map', 'Whole result as HDF5')).bytes.toString('latin1', 1, 4), 'HDF');
});

test('the Python call gives the numbers that are drawn', async () => {
  await page.locator('[data-name=rms-map]').getByRole('button', { name: 'Call' }).click();
  const script = await page.getByLabel('Python', { exact: true }).innerText();
  const { arrays } = await read(site, `/v1/views/${view.id}/statistics`);

  const printed = execFileSync('/usr/bin/python3', [
    '-c',
    `${script}\nprint(json.dumps([list(rms_map.shape), float(np.nansum(rms_map))]))`,
  ]).toString();

  const [shape, sum] = JSON.parse(printed),
    expected = arrays.rms_map.data.reduce((total, value) => total + (value ?? 0), 0);
  assert.deepEqual(shape, arrays.rms_map.shape);
  assert.ok(Math.abs(sum - expected) <= 1e-12 * Math.abs(expected) * arrays.rms_map.data.length);
});

test('the curl call and the permalink give the result itself', async () => {
  await page.locator('[data-name=series]').getByRole('button', { name: 'Call' }).click();
  const command = await page.getByLabel('curl', { exact: true }).innerText();
  const permalink = await page.getByLabel('Permalink', { exact: true }).innerText();

  const result = JSON.parse(execFileSync('sh', ['-c', `${command} --silent`], { maxBuffer: 1e8 }).toString());

  assert.equal(result.analysis, 'series');
  assert.equal(permalink, `${site.url}/v1/results/${result.provenance.digest}`);
  assert.deepEqual((await read(site, permalink.slice(site.url.length))).arrays.mean, result.arrays.mean);
});

test('on paper there are the plots and where they came from, and nothing to press', async () => {
  await page.emulateMedia({ media: 'print' });

  assert.equal(await page.locator('button:visible, select:visible, input:visible').count(), 0);
  assert.match(
    await page.locator('[data-name=series] .print-source').innerText(),
    /\/v1\/views\/.*\/series[\s\S]*digest/,
  );
});
