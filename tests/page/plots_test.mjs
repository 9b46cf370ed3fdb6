import { test } from 'node:test';
import assert from 'node:assert/strict';
import {
  extent,
  linearScale,
  logScale,
  niceAbove,
  paddedRange,
  symmetricLimits,
  tightLimits,
  zoomedRange,
} from '../../client-web/source/plots/scales.js';
import { decadeLabel, decadeTicks, linearTicks, tickLabels } from '../../client-web/source/plots/ticks.js';
import { bandPath, linePath, svg, toText } from '../../client-web/source/plots/svg_tree.js';

const unit = linearScale([0, 10], [0, 100]);

test('a scale and its inverse undo each other', () => {
  for (const scale of [linearScale([-3, 7], [40, 400]), logScale([1e-8, 1e2], [300, 20])]) {
    for (const share of [0, 0.3, 0.71, 1]) {
      const pixel = scale.at(scale.domain[0]) + share * (scale.at(scale.domain[1]) - scale.at(scale.domain[0]));
      assert.ok(Math.abs(scale.at(scale.invert(pixel)) - pixel) < 1e-9);
    }
  }
});

test('a log scale gives every decade the same length', () => {
  const scale = logScale([1, 1000], [0, 300]);

  assert.deepEqual(
    [1, 10, 100, 1000].map((value) => Math.round(scale.at(value))),
    [0, 100, 200, 300],
  );
});

test('a scale without width puts everything in the middle', () => {
  assert.equal(linearScale([5, 5], [0, 100]).at(5), 50);
});

test('the extent passes over what is missing', () => {
  assert.deepEqual(extent([null, 3, NaN, -1, Infinity, 2]), [-1, 3]);
  assert.equal(extent([null, NaN]), null);
});

test('limits of differences have zero in the middle', () => {
  assert.deepEqual(symmetricLimits([-0.3, 0.12, null]), [-0.3, 0.3]);
  assert.deepEqual(symmetricLimits([0.41, 0.2]), [-0.5, 0.5]);
  assert.deepEqual(symmetricLimits([]), [-1, 1]);
});

test('nice numbers are never below what they must hold', () => {
  for (let size = 1e-9; size < 1e9; size *= 1.37) {
    assert.ok(niceAbove(size) >= size * (1 - 1e-9), String(size));
    assert.ok(niceAbove(size) <= 1.6 * size, String(size));
  }
});

test('tight limits hold all numbers and little more', () => {
  const [low, high] = tightLimits([0.0474, 0.2766]);

  assert.ok(low <= 0.0474 && high >= 0.2766);
  assert.ok(high - low < 1.25 * (0.2766 - 0.0474));
});

test('what is never negative keeps zero as its foot', () => {
  assert.equal(paddedRange([0, 1])[0], 0);
  assert.ok(paddedRange([0.9, 1])[0] > 0.8);
});

test('zooming in keeps the place under the cursor, zooming out stays inside the record', () => {
  const [low, high] = zoomedRange([0, 100], 25, 0.5, [0, 100]);
  assert.deepEqual([low, high], [12.5, 62.5]);
  assert.deepEqual(zoomedRange([80, 100], 95, 10, [0, 100]), [0, 100]);
  assert.deepEqual(zoomedRange([80, 100], 95, 2, [0, 100]), [60, 100]);
});

test('ticks are round, inside, and about as many as wanted', () => {
  assert.deepEqual(linearTicks(0, 1, 5), [0, 0.2, 0.4, 0.6, 0.8, 1]);
  assert.deepEqual(linearTicks(-0.075, 0.075, 3), [-0.05, 0, 0.05]);
  // 0.1 + 0.2 is 0.30000000000000004 in binary: ticks must not show it.
  assert.ok(linearTicks(0, 1, 10).every((tick) => String(tick).length <= 3));
});

test('decades are thinned when there are many', () => {
  assert.deepEqual(decadeTicks(1e-3, 1e2, 6).map(decadeLabel), ['10⁻³', '10⁻²', '10⁻¹', '10⁰', '10¹', '10²']);
  assert.ok(decadeTicks(1e-12, 1e4, 6).length <= 6);
});

test('labels have the decimals their step needs, all the same', () => {
  assert.deepEqual(tickLabels([0.0025, 0.005, 0.0075]), ['0.0025', '0.0050', '0.0075']);
  assert.deepEqual(tickLabels([-0.5, 0, 0.5]), ['−0.5', '0', '0.5']);
  assert.deepEqual(tickLabels([0, 20000, 40000]), ['0', '20\u2009000', '40\u2009000']);
  assert.deepEqual(tickLabels([1e-8, 2e-8]), ['1×10⁻⁸', '2×10⁻⁸']);
});

test('a gap in the numbers is a gap in the line', () => {
  assert.equal(linePath([0, 1, 2, 3], [1, null, 2, NaN], unit, unit), 'M0.0 10.0M20.0 20.0');
});

test('a band is closed on each side of a gap', () => {
  const path = bandPath([0, 1, 2, 3, 4], [1, 1, null, 1, 1], [2, 2, 2, 2, 2], unit, unit);

  assert.equal(path, 'M0.0 20.0L10.0 20.0L10.0 10.0L0.0 10.0ZM30.0 20.0L40.0 20.0L40.0 10.0L30.0 10.0Z');
});

test('names from the archive cannot become markup in a saved picture', () => {
  const text = toText(svg('text', { title: '"<&' }, '</text><script>alert(1)</script>\u0000'));

  assert.equal(text, '<text title="&quot;&lt;&amp;">&lt;/text&gt;&lt;script&gt;alert(1)&lt;/script&gt;</text>');
});
