// Numbers, units and names as people read them.

import { test } from 'node:test';
import assert from 'node:assert/strict';
import {
  bytesText,
  intervalText,
  numberText,
  percentText,
  plainNumber,
  statedText,
  steppedText,
  waitText,
  wholeText,
} from '../../client-web/source/numbers.js';
import { unitMeaning, unitText, withUnit } from '../../client-web/source/units.js';
import { angleText, labelOf, seriesQuantities } from '../../client-web/source/quantities.js';
import { formatRemoval, parseRemoval, removalText } from '../../client-web/source/removal.js';

test('significant figures, a true minus sign and powers of ten', () => {
  assert.deepEqual(
    [0.18432, -12.3456, 0, 1234567, 2.5e-8, NaN, null].map((value) => numberText(value, 3)),
    ['0.184', '−12.3', '0', '1.23\u2009×\u200910⁶', '2.50\u2009×\u200910⁻⁸', 'no value', 'no value'],
  );
});

test('rounding that adds a digit keeps the figures', () => {
  assert.equal(numberText(0.99996, 4), '1.000');
  assert.equal(numberText(999.96, 4), '1000');
});

test('whole numbers are grouped from five digits on and never rounded', () => {
  assert.deepEqual([2000, 100000, 9007199254740991].map(wholeText), [
    '2000',
    '100\u2009000',
    '9\u2009007\u2009199\u2009254\u2009740\u2009991',
  ]);
});

test('a value has the decimals of its uncertainty', () => {
  assert.deepEqual(intervalText({ value: 0.184273, low: 0.17912, high: 0.18944 }), {
    value: '0.1843',
    low: '0.1791',
    high: '0.1894',
  });
  assert.deepEqual(intervalText({ value: 1234.56, low: 1200, high: 1270 }), {
    value: '1235',
    low: '1200',
    high: '1270',
  });
  assert.equal(intervalText({ value: 0.5 }).low, null);
});

test('a wide interval leaves three figures of the value', () => {
  assert.deepEqual(intervalText({ value: 0.21437, low: 0.0831, high: 0.3456 }), {
    value: '0.214',
    low: '0.083',
    high: '0.346',
  });
});

test('what was stated is shown as it was stated', () => {
  assert.deepEqual(
    [0.45, 100, 5.32e-7, 1.5].map((value) => statedText(value)),
    ['0.45', '100', '5.32\u2009×\u200910⁻⁷', '1.5'],
  );
  assert.equal(percentText(0.95), '95\u00a0%');
});

test('instants have the decimals that tell neighbouring frames apart', () => {
  assert.equal(steppedText(0.0121, 2e-5 / 10), '0.012100');
});

test('files get plain digits that give the same double back, and nothing for no value', () => {
  assert.equal(Number(plainNumber(0.1 + 0.2)), 0.1 + 0.2);
  assert.deepEqual([null, NaN, Infinity].map(plainNumber), ['', '', '']);
});

test('bytes in binary units, waits in words', () => {
  assert.deepEqual([0, 1023, 1536, 2 ** 31].map(bytesText), ['0 bytes', '1023 bytes', '1.50 KiB', '2.00 GiB']);
  assert.deepEqual([0.4, 12.2, 200].map(waitText), ['less than a second', '12 s', '3 min']);
});

test('units of the service become those of people', () => {
  assert.deepEqual(['um', 'um2/Hz', 'm/s', '1', 'kg/m3', 'waves', 'deg', '1/m'].map(unitText), [
    'µm',
    'µm²/Hz',
    'm/s',
    '',
    'kg/m³',
    'waves',
    '°',
    '1/m',
  ]);
  assert.equal(withUnit('OPD', 'um'), 'OPD (µm)');
  assert.equal(withUnit('Skewness', '1'), 'Skewness');
});

test('waves and normalised say what they are measured by', () => {
  assert.match(unitMeaning('waves', { wavelength_m: 532e-9 }), /532 nm/);
  assert.match(unitMeaning('normalised', {}), /1\.225/);
  assert.equal(unitMeaning('um', {}), '');
});

test('a name nobody listed is shown in words', () => {
  assert.equal(labelOf('opd_rms_median_of_halves'), 'OPD_rms, median of halves');
  assert.equal(labelOf('signal:wall_pressure'), 'Signal wall_pressure');
  assert.ok(seriesQuantities({ signals: [{ name: 'p' }] }).includes('signal:p'));
});

test('angles read as they are stated, and missing ones are said to be unknown', () => {
  assert.equal(angleText({ azimuth_deg: -30.5, elevation_deg: null }), 'azimuth −30.5°, elevation unknown');
});

test('what is removed goes from text to boxes and back', () => {
  for (const text of ['none', 'piston', 'piston,tilt,mean', 'mean,modes:10', 'piston,tilt,mean,focus,modes:3']) {
    assert.equal(formatRemoval(parseRemoval(text)), text);
  }
  assert.equal(parseRemoval('piston,coma'), null);
  assert.equal(removalText('piston,tilt,mean'), 'piston, tilt and steady lensing removed');
  assert.equal(removalText('none'), 'nothing removed');
});
