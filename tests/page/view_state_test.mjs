import { test } from 'node:test';
import assert from 'node:assert/strict';
import {
  changed,
  emptyState,
  formatState,
  isNewPlace,
  parseState,
  preparation,
  withRun,
  withView,
} from '../../client-web/source/view_state.js';

/** Numbers that look random and are the same in every run; the seed is in the name of the test. */
function random(seed) {
  let state = seed;
  return () => (state = (Math.imul(state, 1664525) + 1013904223) >>> 0) / 2 ** 32;
}

/** A state with about half its names set to something a person or a link might put there. */
function someState(next) {
  const pick = (...choices) => choices[Math.floor(next() * choices.length)];
  const range = () => {
    const low = Number((next() * 2 - 1).toPrecision(6));
    return [low, low + Number(next().toPrecision(3)) + 1e-3];
  };
  const texts = [
    'wall-dome',
    'a b',
    'x&y=z',
    'ä/ö?#',
    '100%',
    '"quoted"',
    '1,2',
    'modes:10,mean',
    'signal:p_1',
    "o'clock",
    '+1',
  ];
  const changes = {
    campaign: pick(...texts),
    run: pick(...texts),
    view: pick(...texts),
    show: 'index',
    from: pick('0.01', '1e-3'),
    to: '0.5',
    first: '0',
    last: '99',
    aperture: pick('80%', '0.1'),
    obscuration: '0.3',
    center: '0.01,-0.02',
    remove: pick('none', 'modes:10', 'piston'),
    mean_over: 'window',
    length_unit: pick('nm', 'waves'),
    field: 'skewness',
    quantity: pick('tip', 'signal:wall pressure'),
    zoom: range(),
    frame: Math.floor(next() * 1e6),
    frame_limit: next() + 0.1,
    mean_limit: 2,
    rms_limits: range(),
    field_limits: range(),
  };
  return changed(emptyState, Object.fromEntries(Object.entries(changes).filter(() => next() < 0.5)));
}

test('an address without parameters is the empty state, and the other way round', () => {
  assert.deepEqual(parseState('').state, emptyState);
  assert.equal(formatState(emptyState), '');
});

test('writing a state and reading it back gives the same state, seed 20240607', () => {
  const next = random(20240607);
  for (let trial = 0; trial < 500; ++trial) {
    const state = someState(next);
    const { state: back, refused } = parseState(formatState(state));
    assert.deepEqual(refused, []);
    assert.deepEqual(back, state, `trial ${trial}: ${formatState(state)}`);
  }
});

test('reading an address and writing it gives one form for equal states', () => {
  const query = formatState(parseState('view=v1&run=r1&zoom=0.10..0.20&obscuration=0&remove=piston,tilt,mean').state);

  assert.equal(query, 'run=r1&view=v1&zoom=0.1..0.2');
});

test('commas and colons stay readable in the address', () => {
  assert.equal(formatState(changed(emptyState, { remove: 'modes:10,mean' })), 'remove=modes:10,mean');
});

test('what the page does not know is said and not dropped silently', () => {
  const { state, refused } = parseState('?view=v1&colour=red&frame=soon&zoom=2..1&view=v2&show=everything');

  assert.equal(state.view, 'v1');
  assert.deepEqual(
    refused.map(({ name }) => name),
    ['colour', 'frame', 'zoom', 'view', 'show'],
  );
  for (const { reason } of refused) assert.ok(reason.length > 0);
});

test('numbers that are not finite, and control characters, are refused', () => {
  for (const query of [
    'frame=-1',
    'frame=1.5',
    'frame_limit=Infinity',
    'frame_limit=0',
    'frame_limit=-1',
    'frame_limit=1e999',
    'view=a%00b',
    'view=',
    `run=${'x'.repeat(201)}`,
    'zoom=1',
    'zoom=1..2..3',
  ]) {
    assert.equal(parseState(query).refused.length, 1, query);
  }
});

test('a preparation holds only what differs from the defaults of the service', () => {
  const state = changed(emptyState, { aperture: '80%', remove: 'piston,tilt,mean', length_unit: 'nm', frame: 1 });

  assert.deepEqual(preparation(state), { aperture: '80%', length_unit: 'nm' });
});

test('choosing another view keeps the preparation and drops what belongs to the record', () => {
  const state = withView(changed(emptyState, { run: 'r', view: 'a', remove: 'none', zoom: [0, 1], frame: 5 }), 'b');

  assert.deepEqual([state.view, state.remove, state.zoom, state.frame], ['b', 'none', null, null]);
});

test('choosing another run leaves the view and its window', () => {
  const state = withRun(
    changed(emptyState, { run: 'r', view: 'a', from: '0.1', aperture: '80%', field_limits: [0, 1] }),
    's',
  );

  assert.deepEqual(
    [state.run, state.view, state.from, state.aperture, state.field_limits],
    ['s', null, null, '80%', null],
  );
});

test('subjects and preparations are places to come back to, adjustments are not', () => {
  assert.ok(isNewPlace(emptyState, changed(emptyState, { view: 'a' })));
  assert.ok(isNewPlace(emptyState, changed(emptyState, { remove: 'none' })));
  assert.ok(!isNewPlace(emptyState, changed(emptyState, { zoom: [0, 1], frame: 1, frame_limit: 1 })));
});

test('a name that the state does not have is a fault of the program', () => {
  assert.throws(() => changed(emptyState, { colour: 'red' }), /no colour/);
});
