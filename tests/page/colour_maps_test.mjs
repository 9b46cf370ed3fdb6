// The colour maps by number: lightness and distance in OKLab (Ottosson 2020), and three dichromats simulated by the
// matrices of Machado, Oliveira & Fernandes (2009) at severity 1, in linear sRGB, typed from memory: each row adds up to
// 1, so that white stays white, as the paper's do.

import { test } from 'node:test';
import assert from 'node:assert/strict';
import {
  diverging,
  divergingColour,
  hexColour,
  isLight,
  linearFromByte,
  oklabFromLinear,
  sequential,
  sequentialColour,
  tableIndex,
} from '../../client-web/source/plots/colour_maps.js';

const eyes = {
  normal: [
    [1, 0, 0],
    [0, 1, 0],
    [0, 0, 1],
  ],
  protanope: [
    [0.152286, 1.052583, -0.204868],
    [0.114503, 0.786281, 0.099216],
    [-0.003882, -0.048116, 1.051998],
  ],
  deuteranope: [
    [0.367322, 0.860646, -0.227968],
    [0.280085, 0.672501, 0.047413],
    [-0.01182, 0.04294, 0.968881],
  ],
  tritanope: [
    [1.255528, -0.076749, -0.178779],
    [-0.078411, 0.930809, 0.147602],
    [0.004733, 0.691367, 0.3039],
  ],
};

const clamped = (value) => Math.min(1, Math.max(0, value));
const seenBy = (matrix, linear) =>
  oklabFromLinear(matrix.map((row) => clamped(row.reduce((sum, share, i) => sum + share * linear[i], 0))));
const linearOf = (map, t) => [0, 1, 2].map((k) => linearFromByte(map.bytes[4 * Math.round(t * 255) + k]));
const samples = Array.from({ length: 129 }, (_, i) => i / 128);

/** Colours of a list of stops, straight between them as stored: for the control. */
function mapOfStops(stops) {
  const bytes = new Uint8ClampedArray(1024);
  const colours = stops.map((hex) => [1, 3, 5].map((i) => parseInt(hex.slice(i, i + 2), 16)));
  for (let i = 0; i < 256; ++i) {
    const place = (i / 255) * (stops.length - 1),
      k = Math.min(stops.length - 2, Math.floor(place)),
      share = place - k;
    bytes.set([...[0, 1, 2].map((c) => colours[k][c] * (1 - share) + colours[k + 1][c] * share), 255], 4 * i);
  }
  return { bytes };
}

// ColorBrewer's 11-class RdYlGn (Brewer, colorbrewer2.org), stops from memory.
const redYellowGreen = mapOfStops([
  '#a50026',
  '#d73027',
  '#f46d43',
  '#fdae61',
  '#fee08b',
  '#ffffbf',
  '#d9ef8b',
  '#a6d96a',
  '#66bd63',
  '#1a9850',
  '#006837',
]);

/** Smallest distance between the two arms at equal size, over sizes above a quarter of full scale. */
function armsDistance(map, matrix) {
  let least = Infinity;
  for (let size = 0.25; size <= 1; size += 1 / 64) {
    const a = seenBy(matrix, linearOf(map, (1 - size) / 2)),
      b = seenBy(matrix, linearOf(map, (1 + size) / 2));
    least = Math.min(least, Math.hypot(a[0] - b[0], a[1] - b[1], a[2] - b[2]));
  }
  return least;
}

/** Largest difference in lightness between the two arms. */
function armsLightness(map) {
  return Math.max(
    ...samples.map((size) =>
      Math.abs(oklabFromLinear(linearOf(map, (1 - size) / 2))[0] - oklabFromLinear(linearOf(map, (1 + size) / 2))[0]),
    ),
  );
}

// What page tests of colour for blind eyes ask: 0.08 in OKLab is four times what is just told apart side by side (0.02,
// common practice).
const leastDistance = 0.08;

test('the sequential map gets lighter with every step', () => {
  const lightness = samples.map((t) => oklabFromLinear(linearOf(sequential, t))[0]);

  for (let i = 1; i < lightness.length; ++i) assert.ok(lightness[i] > lightness[i - 1], `step ${i}`);
});

test('the sequential map stays monotone in lightness for every kind of dichromat', () => {
  for (const [eye, matrix] of Object.entries(eyes)) {
    const lightness = samples.filter((_, i) => i % 8 === 0).map((t) => seenBy(matrix, linearOf(sequential, t))[0]);
    for (let i = 1; i < lightness.length; ++i) assert.ok(lightness[i] > lightness[i - 1], `${eye}, step ${i}`);
  }
});

test('both arms of the diverging map get darker away from zero, and are equal in lightness', () => {
  const lightness = samples.map((size) => oklabFromLinear(linearOf(diverging, (1 + size) / 2))[0]);

  for (let i = 1; i < lightness.length; ++i) assert.ok(lightness[i] < lightness[i - 1] + 1e-9, `step ${i}`);
  // Rounding to 8 bits moves a lightness by up to half of 1/255 each way.
  assert.ok(armsLightness(diverging) < 0.02, String(armsLightness(diverging)));
});

test('the arms of the diverging map are told apart by every kind of eye', () => {
  for (const [eye, matrix] of Object.entries(eyes)) {
    assert.ok(armsDistance(diverging, matrix) >= leastDistance, `${eye}: ${armsDistance(diverging, matrix)}`);
  }
});

test('the same measure finds red-yellow-green unfit, so it can fail', () => {
  const least = Math.min(...Object.values(eyes).map((matrix) => armsDistance(redYellowGreen, matrix)));

  assert.ok(least < leastDistance, String(least));
});

test('no colour lies outside sRGB, where it would be clipped to a flat patch', () => {
  for (let i = 0; i <= 512; ++i) {
    for (const component of [...sequentialColour(i / 512), ...divergingColour(i / 256 - 1)]) {
      // Half a step of 8 bits near black is 0.5/255/12.92.
      assert.ok(component > -0.5 / 255 && component < 1 + 0.5 / 255, `${i}: ${component}`);
    }
  }
});

test('neighbouring colours of the sequential map are told apart evenly, within a factor of three', () => {
  const steps = samples.slice(1).map((t, i) => {
    const a = oklabFromLinear(linearOf(sequential, t)),
      b = oklabFromLinear(linearOf(sequential, samples[i]));
    return Math.hypot(a[0] - b[0], a[1] - b[1], a[2] - b[2]);
  });

  assert.ok(Math.max(...steps) / Math.min(...steps) < 3, `${Math.min(...steps)} ${Math.max(...steps)}`);
});

test('OKLab of white is one and of mid grey is its cube root: Ottosson 2020, from the definition', () => {
  const [lightness, a, b] = oklabFromLinear([1, 1, 1]);

  assert.ok(Math.abs(lightness - 1) < 1e-6 && Math.abs(a) < 1e-6 && Math.abs(b) < 1e-6);
  assert.ok(Math.abs(oklabFromLinear([0.125, 0.125, 0.125])[0] - 0.5) < 1e-6);
});

test('a number finds its entry, and numbers beyond the limits the ends', () => {
  assert.deepEqual(
    [-5, 0, 0.5, 1, 7].map((value) => tableIndex(value, 0, 1)),
    [0, 0, 128, 255, 255],
  );
  assert.equal(tableIndex(3, 3, 3), 128);
});

test('text on a colour keeps a contrast of 4.5 to 1: WCAG 2.2, 1.4.3', () => {
  const luminance = ([r, g, b]) => 0.2126 * r + 0.7152 * g + 0.0722 * b;
  for (let i = 0; i < 256; ++i) {
    const here = luminance([0, 1, 2].map((k) => linearFromByte(sequential.bytes[4 * i + k])));
    const contrast = isLight(sequential, i) ? (here + 0.05) / 0.05 : 1.05 / (here + 0.05);
    assert.ok(contrast >= 4.5, `${i} ${hexColour(sequential, i)}: ${contrast}`);
  }
});
