// The page against the real program: what a person reads there is what the interface says.

import { test, before, after, beforeEach, afterEach } from 'node:test';
import assert from 'node:assert/strict';
import { unitText } from '../../client-web/source/units.js';
import { launch, openPage, settled } from './support/browser.mjs';
import { parsed, read, tunnelRun } from './support/reading.mjs';
import { serve } from './support/serve.mjs';

let site, browser, run, views, view, opened, page;

before(async () => {
  site = await serve({ views: 24, frames: 2000, grid: 48 });
  browser = await launch();
  ({ run, views } = await tunnelRun(site));
  view = views.find(({ checks }) => checks.length === 0) ?? views[0];
});
after(async () => {
  await browser?.close();
  await site?.close();
});
beforeEach(async () => {
  opened = await openPage(browser, { viewport: { width: 1440, height: 900 } });
  page = opened.page;
});
afterEach(async () => {
  await opened.context.close();
  assert.deepEqual(opened.complaints, []);
});

const viewAddress = (query = '') => `${site.url}/?run=${run.id}&view=${view.id}${query && `&${query}`}`;
const readout = (name) => page.locator(`[data-name="${name}"] .readout`);
const query = () => new URL(page.url()).searchParams;

/** Waits until a figure's reading line matches, and gives it. */
async function reads(name, pattern) {
  await page.waitForFunction(
    ([figure, source]) =>
      new RegExp(source).test(document.querySelector(`[data-name="${figure}"] .readout`).textContent),
    [name, pattern.source],
  );
  return readout(name).textContent();
}

test('from the archive to a run to a view, and back again', async () => {
  await page.goto(site.url);
  await page.getByRole('heading', { name: 'What the archive holds' }).waitFor();
  await page.getByRole('link', { name: run.name ?? run.id, exact: true }).click();

  await page.locator('[data-panel=field_of_regard] .view-link').first().waitFor();
  assert.equal(await page.locator('.view-link').count(), views.length);
  assert.equal(query().get('run'), run.id);

  await page.locator(`.view-link[data-view="${view.id}"]`).click();
  await page.locator('[data-name=series] canvas').waitFor();
  assert.match(
    await page.locator('h1').innerText(),
    new RegExp(`Azimuth ${view.azimuth_deg}°, elevation ${view.elevation_deg}°`),
  );
  assert.match(await page.title(), /azimuth .* Bentlight/);

  await page.goBack();
  await page.locator('[data-panel=field_of_regard] .view-link').first().waitFor();
  assert.equal(query().get('view'), null);
  await page.goBack();
  await page.getByRole('heading', { name: 'What the archive holds' }).waitFor();
});

test('the field of regard is one tab stop, walked with arrow keys, and reads its values', async () => {
  const { arrays, provenance } = await read(site, `/v1/runs/${run.id}/field-of-regard?quantity=opd_rms_mean`);
  await page.goto(`${site.url}/?run=${run.id}`);
  await settled(page);

  assert.equal(await page.locator('.view-link[tabindex="0"]').count(), 1);
  await page.locator('.view-link[tabindex="0"]').focus();
  await page.keyboard.press('End');
  await page.keyboard.press('ArrowLeft');
  await page.keyboard.press('ArrowUp');

  const id = await page.evaluate(() => document.activeElement.dataset.view);
  const place = provenance.views.indexOf(id);
  const text = await reads(
    'field-of-regard',
    new RegExp(`azimuth ${arrays.azimuth.data[place]}°, elevation ${arrays.elevation.data[place]}°`),
  );
  // Shown with two figures of its interval's half width: half of the last of them.
  const shown = parsed(/: ([^ \u00a0]+)/.exec(text)[1]);
  assert.ok(
    Math.abs(shown - arrays.value.data[place]) <= (arrays.high.data[place] - arrays.low.data[place]) * 0.05,
    text,
  );

  await page.keyboard.press('Enter');
  await page.locator('[data-name=series] canvas').waitFor();
  assert.equal(query().get('view'), id);
});

test('the field of regard can be read as a table', async () => {
  const { arrays } = await read(site, `/v1/runs/${run.id}/field-of-regard?quantity=skewness`);
  await page.goto(`${site.url}/?run=${run.id}&field=skewness`);
  await settled(page);

  await page.locator('[data-name=field-of-regard]').getByRole('button', { name: 'Numbers' }).click();

  const cells = await page.locator('[data-name=field-of-regard] tbody tr td:nth-child(4)').allInnerTexts();
  assert.equal(cells.length, views.length);
  // Five significant figures: half a unit of the fifth.
  cells.forEach((cell, i) =>
    assert.ok(Math.abs(parsed(cell) - arrays.value.data[i]) <= 5e-5 * Math.abs(arrays.value.data[i]) + 1e-12),
  );
});

test('the large number is the mean of OPD_rms with its interval', async () => {
  const { values } = await read(site, `/v1/views/${view.id}/statistics`);
  await page.goto(viewAddress());
  await settled(page);

  const { value, low, high } = values.opd_rms_mean;
  const shown = parsed(await page.locator('.finding-item.is-first .number').innerText());
  assert.ok(Math.abs(shown - value) <= (high - low) * 0.05);
  assert.match(await page.locator('.finding-item.is-first .interval').innerText(), /to .* · 95.%/);
});

test('arrow keys read the series, and the reading is what the interface says', async () => {
  await page.goto(viewAddress());
  await settled(page);
  const path = await page.evaluate(() =>
    performance
      .getEntriesByType('resource')
      .map(({ name }) => name)
      .find((name) => name.includes('/series?')),
  );
  const { arrays } = await read(site, path.slice(site.url.length));

  await page.getByRole('slider', { name: /^Against time/ }).focus();
  for (let k = 0; k < 3; ++k) await page.keyboard.press('ArrowRight');

  const text = await reads('series', /t = /);
  const time = parsed(/t = ([^\u00a0 ]+)/.exec(text)[1]);
  // Written with a fifth of a frame's step or finer.
  assert.ok(Math.abs(time - arrays.time.data[2]) <= 0.2 / view.frame_rate_hz, text);
  const mean = parsed(/(?:mean|s:) ([^\u00a0 ]+)\u00a0/.exec(text)[1]);
  assert.ok(Math.abs(mean - arrays.mean.data[2]) <= 5e-4 * arrays.mean.data[2], text);
});

test('zooming asks for finer columns of the stretch that is shown', async () => {
  await page.goto(viewAddress());
  await settled(page);
  const asked = [];
  page.on(
    'request',
    (request) => request.url().includes('/series?') && asked.push(new URL(request.url()).searchParams),
  );

  await page.getByRole('slider', { name: /^Against time/ }).focus();
  await page.keyboard.press('End');
  await page.keyboard.press('+');
  await page.keyboard.press('+');
  await settled(page);

  const zoom = query().get('zoom').split('..').map(Number);
  const whole = view.frames / view.frame_rate_hz;
  assert.ok(Math.abs(zoom[1] - zoom[0] - whole / 4) < whole * 0.01, String(zoom));
  assert.deepEqual([Number(asked.at(-1).get('from')), Number(asked.at(-1).get('to'))], zoom);
  await page.locator('[data-name=series] .finding', { hasText: 'every one drawn' }).waitFor();

  await page.getByRole('slider', { name: /^Against time/ }).press('0');
  await settled(page);
  assert.equal(query().get('zoom'), null);
});

test('dragging zooms, a double click shows all again', async () => {
  await page.goto(viewAddress());
  await settled(page);
  const area = await page.locator('[data-name=series] .u-over').boundingBox();

  await page.mouse.move(area.x + area.width * 0.25, area.y + 60);
  await page.mouse.down();
  await page.mouse.move(area.x + area.width * 0.5, area.y + 70, { steps: 5 });
  await page.mouse.up();
  await settled(page);

  const zoom = query().get('zoom').split('..').map(Number),
    whole = view.frames / view.frame_rate_hz;
  assert.ok(Math.abs(zoom[0] / whole - 0.25) < 0.02 && Math.abs(zoom[1] / whole - 0.5) < 0.02, String(zoom));
  assert.equal(query().get('frame'), null, 'the drag is no click');

  await page.locator('[data-name=series] .u-over').dblclick({ position: { x: 30, y: 60 } });
  await settled(page);
  assert.equal(query().get('zoom'), null);
});

test('a click on the series shows the frame of that instant', async () => {
  await page.goto(viewAddress());
  await settled(page);
  const area = await page.locator('[data-name=series] .u-over').boundingBox();

  await page.mouse.click(area.x + area.width / 2, area.y + 80);
  await settled(page);
  await page.waitForFunction(() => new URL(location.href).searchParams.has('frame'));

  const frame = Number(query().get('frame'));
  // A pixel of the plot is frames / width of them.
  assert.ok(Math.abs(frame - view.frames / 2) <= 2 + (2 * view.frames) / area.width, String(frame));
  assert.match(await page.locator('.frame-label').innerText(), new RegExp(`frame ${frame} of`));
});

test('a point of the wavefront reads as the interface says, and what is outside is no number', async () => {
  const { arrays } = await read(site, `/v1/views/${view.id}/frames?first=7&last=7`);
  await page.goto(viewAddress('frame=7'));
  await settled(page);
  const [, rows, columns] = arrays.frames.shape;
  const map = page.getByRole('application', { name: /^Wavefront/ });

  await map.focus();
  await map.press('ArrowUp');
  const text = await reads('frames', /^x /);
  const row = Math.floor(rows / 2),
    column = Math.floor(columns / 2);
  const value = arrays.frames.data[row * columns + column];
  assert.ok(
    Math.abs(parsed(/: ([^\u00a0]+)/.exec(text)[1]) - value) <= 5e-4 * Math.abs(value) + 1e-9,
    `${text} ${value}`,
  );

  await map.press('Home');
  for (let k = 0; k < 10; ++k) await map.press('Shift+ArrowUp'); // into the corner, beyond the disc
  await reads('frames', /outside the aperture/);
});

test('the image is drawn from the numbers: colour where there is one, nothing where there is none', async () => {
  const { arrays } = await read(site, `/v1/views/${view.id}/statistics`);
  await page.goto(viewAddress());
  await settled(page);
  const {
    shape: [rows, columns],
    data,
  } = arrays.rms_map;

  const seen = await page.evaluate(
    async ([height, width]) => {
      const canvas = document.querySelector('[data-name="rms-map"] canvas');
      const { sequential } = await import('/source/plots/colour_maps.js');
      const [low, high] = [...document.querySelectorAll('[data-name="rms-map"] .limits input[type=number]')].map(
        (input) => input.valueAsNumber,
      );
      return {
        pixels: [...canvas.getContext('2d').getImageData(0, 0, width, height).data],
        table: [...sequential.bytes],
        low,
        high,
      };
    },
    [rows, columns],
  );

  let drawn = 0;
  for (let row = 0; row < rows; ++row) {
    for (let column = 0; column < columns; ++column) {
      // The y axis points up, so the first row of numbers is the last of pixels.
      const at = 4 * ((arrays.y.data[rows - 1] > arrays.y.data[0] ? rows - 1 - row : row) * columns + column);
      const value = data[row * columns + column];
      if (value === null) {
        assert.equal(seen.pixels[at + 3], 0);
        continue;
      }
      const index = Math.min(255, Math.max(0, Math.round(((value - seen.low) / (seen.high - seen.low)) * 255)));
      const distance = Math.max(...[0, 1, 2].map((k) => Math.abs(seen.pixels[at + k] - seen.table[4 * index + k])));
      // One entry of the table, for limits that the fields show rounded to six figures.
      assert.ok(distance <= 4, `${row}, ${column}`);
      drawn += 1;
    }
  }
  assert.ok(drawn > 0.5 * rows * columns);
});

test('frames are stepped by button, by key and by slider', async () => {
  await page.goto(viewAddress('frame=10'));
  await settled(page);
  const label = page.locator('.frame-label');

  await page.getByRole('button', { name: 'One frame on' }).click();
  await label.getByText('frame 11 of').waitFor();
  await page.getByRole('application', { name: /^Wavefront/ }).press('PageDown');
  await label.getByText('frame 12 of').waitFor();
  await page.getByRole('application', { name: /^Wavefront/ }).press('PageUp');
  await label.getByText('frame 11 of').waitFor();
  await page.getByRole('slider', { name: 'Frame', exact: true }).press('End');
  await label.getByText(`frame ${view.frames - 1} of`).waitFor();
  await page.waitForFunction(() => document.querySelector('.step-forward').disabled);
  await page.waitForFunction((last) => location.search.includes(`frame=${last}`), view.frames - 1);
});

test('playing goes on by itself from replies of many frames, and stops when told', async () => {
  await page.goto(viewAddress('frame=0'));
  await settled(page);
  const asked = [];
  page.on('request', (request) => request.url().includes('/frames?') && asked.push(request.url()));

  await page.getByLabel('Speed of playing').selectOption('30');
  await page.getByRole('button', { name: 'Play' }).click();
  await page.waitForFunction(
    () => Number(/frame (\d+)/.exec(document.querySelector('.frame-label').textContent)[1]) >= 25,
  );
  await page.getByRole('button', { name: 'Pause' }).click();
  const frame = /frame (\d+)/.exec(await page.locator('.frame-label').innerText())[1];
  await page.waitForTimeout(300);

  assert.equal(/frame (\d+)/.exec(await page.locator('.frame-label').innerText())[1], frame);
  const bulk = asked.filter((url) => url.includes('format=npy'));
  assert.ok(bulk.length >= 2 && asked.length <= 6, `${asked.length} requests for ${frame} frames`);
  await page.waitForFunction((number) => location.search.includes(`frame=${number}`), frame);
});

test('nothing plays by itself, and reduced motion starts slowly', async () => {
  await page.goto(viewAddress('frame=3'));
  await settled(page);
  await page.waitForTimeout(300);

  assert.match(await page.locator('.frame-label').innerText(), /frame 3 of/);
  assert.equal(await page.getByLabel('Speed of playing').inputValue(), '2');
});

test('a bin of the histogram reads as the interface says', async () => {
  const { arrays } = await read(site, `/v1/views/${view.id}/statistics`);
  await page.goto(viewAddress());
  await settled(page);

  await page.getByRole('slider', { name: /^Histogram/ }).focus();
  for (let k = 0; k < 4; ++k) await page.keyboard.press('ArrowRight');

  await reads('histogram', new RegExp(`: ${arrays.histogram_count.data[3]} frames`));
});

test('a changed preparation is computed anew, stands in the address, and Back undoes it', async () => {
  const { values } = await read(site, `/v1/views/${view.id}/statistics?remove=piston`);
  await page.goto(viewAddress());
  await settled(page);
  const number = page.locator('.finding-item.is-first .number');
  const before = await number.innerText();

  await page.getByLabel('tip and tilt').uncheck();
  await page.getByLabel('steady lensing', { exact: true }).uncheck();
  await page.getByRole('button', { name: 'Apply' }).click();
  await page.waitForFunction(
    (text) => document.querySelector('.finding-item.is-first .number').textContent !== text,
    before,
  );
  await settled(page);

  assert.equal(query().get('remove'), 'piston');
  const { value, low, high } = values.opd_rms_mean;
  assert.ok(Math.abs(parsed(await number.innerText()) - value) <= (high - low) * 0.05);
  assert.match(await page.locator('[data-name=values] .warnings').innerText(), /steady lensing/);

  await page.goBack();
  await page.waitForFunction(
    (text) => document.querySelector('.finding-item.is-first .number').textContent === text,
    before,
  );
  assert.ok(await page.getByLabel('tip and tilt').isChecked());
});

test('the unit changes at once, in numbers, labels and names alike', async () => {
  await page.goto(viewAddress());
  await settled(page);
  const before = parsed(await page.locator('.finding-item.is-first .number').innerText());

  await page.locator('.units label', { hasText: 'nm' }).click();
  await page.locator('.finding-item.is-first .unit', { hasText: 'nm' }).waitFor();
  await settled(page);

  const after = parsed(await page.locator('.finding-item.is-first .number').innerText());
  assert.ok(Math.abs(after / (1000 * before) - 1) < 0.01);
  assert.match(await page.locator('[data-name=series] .axis-title').innerText(), /\(nm\)/);
  assert.match(await page.locator('[data-name=rms-map] .finding').innerText(), /nm/);
});

test('a smaller aperture with an obscuration is read from the frames, and shows in the map', async () => {
  await page.goto(viewAddress());
  await settled(page);
  const masked = () =>
    page.evaluate(() => {
      const canvas = document.querySelector('[data-name="rms-map"] canvas');
      return canvas
        .getContext('2d')
        .getImageData(0, 0, canvas.width, canvas.height)
        .data.filter((byte, i) => i % 4 === 3 && byte === 255).length;
    });
  const whole = await masked();

  await page.getByLabel('Diameter').fill('70');
  await page.getByLabel('Obscuration (ratio)').fill('0.4');
  await page.getByLabel('Obscuration (ratio)').press('Enter');
  await page.waitForFunction(() => location.search.includes('aperture=70'));
  await settled(page);

  // 0.7² of the area, less 0.4² of that; a stair-stepped rim of 48 points is off by about a point all round.
  assert.ok(Math.abs((await masked()) / whole - 0.49 * 0.84) < 0.06, `${await masked()} of ${whole}`);
});

test('a window from the series narrows the statistics', async () => {
  await page.goto(viewAddress(`zoom=0.01..0.02`));
  await settled(page);

  await page.getByRole('button', { name: 'Use as window' }).click();
  await settled(page);

  assert.deepEqual([query().get('from'), query().get('to'), query().get('zoom')], ['0.01', '0.02', null]);
  const { values } = await read(site, `/v1/views/${view.id}/statistics?from=0.01&to=0.02`);
  const { value, low, high } = values.opd_rms_mean;
  assert.ok(
    Math.abs(parsed(await page.locator('.finding-item.is-first .number').innerText()) - value) <= (high - low) * 0.05,
  );
});

test('what the server refuses stands at the field it is about', async () => {
  await page.goto(viewAddress());
  await settled(page);

  await page.getByLabel('Obscuration (ratio)').fill('7');
  await page.getByRole('button', { name: 'Apply' }).click();

  await page.locator('.field-error').waitFor();
  assert.match(await page.locator('.field-error').innerText(), /obscuration=7/i);
  assert.equal(await page.evaluate(() => document.activeElement.name), 'obscuration');
  opened.complaints.splice(0, Infinity, ...opened.complaints.filter((text) => !/status of 400/.test(text)));
});

test('locked limits stay when another view is opened, and cut ends are marked', async () => {
  await page.goto(viewAddress('rms_limits=0..0.0001'));
  await settled(page);
  const marks = page.locator('[data-name=rms-map] svg path[stroke-width="0.75"]');

  assert.equal(await marks.count(), 1, 'the upper end is cut');
  const other = views.find(({ id }) => id !== view.id);
  await page.locator(`.view-link[data-view="${other.id}"]`).click();
  await page.waitForFunction((id) => location.search.includes(id), other.id);
  await settled(page);
  assert.equal(query().get('rms_limits'), '0..0.0001');

  await page.locator('[data-name=rms-map]').getByLabel('lock').uncheck();
  await page.waitForFunction(() => !location.search.includes('rms_limits'));
  assert.equal(await marks.count(), 0);
});

test('a pasted address opens the same plots', async () => {
  await page.goto(viewAddress('remove=piston,tilt&length_unit=nm&quantity=tip&zoom=0.005..0.02&frame=400'));
  await settled(page);
  const shown = () =>
    page.evaluate(() =>
      [...document.querySelectorAll('.finding, .frame-label, .number, .axis-title')].map((each) => each.textContent),
    );
  const first = await shown(),
    address = page.url();

  const other = await openPage(browser, { viewport: { width: 1440, height: 900 } });
  await other.page.goto(address);
  await settled(other.page);
  page = other.page;

  assert.deepEqual(await shown(), first);
  assert.deepEqual(other.complaints, []);
  await other.context.close();
});

test('companion signals can be drawn, in their own unit', async () => {
  const { signals } = await read(site, `/v1/views/${view.id}`);
  await page.goto(viewAddress());
  await settled(page);

  await page.getByLabel('Quantity').selectOption(`signal:${signals[0].name}`);
  await page.getByRole('heading', { name: `Signal ${signals[0].name} against time` }).waitFor();

  assert.match(
    await page.locator('[data-name=series] .axis-title').innerText(),
    new RegExp(`\\(${unitText(signals[0].unit)}\\)`),
  );
});

test('the index says which file was refused and why', async () => {
  const { items } = await read(site, '/v1/index/refusals');
  await page.goto(site.url);
  await page.getByRole('link', { name: /refused/ }).click();
  await page.getByRole('heading', { name: 'Refused files' }).waitFor();

  const row = page.locator('.refusals tbody tr', { hasText: 'not_a_wavefront.h5' });
  assert.match(await row.innerText(), new RegExp(items[0].code));
});

test('the theme follows the system until one is chosen, and the choice stays', async () => {
  await page.emulateMedia({ colorScheme: 'dark' });
  await page.goto(site.url);
  const ground = () => page.evaluate(() => getComputedStyle(document.documentElement).backgroundColor);
  const dark = await ground();
  await page.getByLabel('Theme').selectOption('light');
  const light = await ground();

  assert.notEqual(light, dark);
  await page.reload();
  assert.equal(await ground(), light);
});

test('when the program stops, the plots stay and say that they are old', async () => {
  const own = await serve({ views: 2, frames: 200, grid: 16 });
  const { run: ownRun, views: ownViews } = await tunnelRun(own);
  await page.goto(`${own.url}/?run=${ownRun.id}&view=${ownViews[0].id}`);
  await settled(page);

  await own.stop();
  await page.locator('.units label', { hasText: 'nm' }).click();

  await page.locator('[data-name=series] .face-lost').waitFor();
  assert.ok(await page.locator('[data-name=series] canvas').isVisible());
  opened.complaints.splice(0, Infinity, ...opened.complaints.filter((text) => !/ERR_CONNECTION/.test(text)));
  await own.close();
});
