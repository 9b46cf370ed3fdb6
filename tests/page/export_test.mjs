import { test } from 'node:test';
import assert from 'node:assert/strict';
import { execFileSync } from 'node:child_process';
import { mkdtempSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import path from 'node:path';
import zlib from 'node:zlib';
import { callTexts, crc32, csvText, fileStem, mapTable, withText } from '../../client-web/source/export.js';
import { parseNpy } from '../../client-web/source/npy.js';
import { address } from '../../client-web/source/api.js';

test('CSV has provenance, a head with units, and empty fields for no value', () => {
  const text = csvText(
    {
      columns: [
        { name: 'time', unit: 's', values: [0, 0.5] },
        { name: 'a,b', unit: '1', values: [null, 1e-7] },
      ],
    },
    ['Bentlight', 'digest ab'],
  );

  assert.equal(text, '# Bentlight\r\n# digest ab\r\ntime (s),"a,b"\r\n0,\r\n0.5,1e-7\r\n');
});

test('a map becomes columns in the order of its rows', () => {
  const { columns } = mapTable({
    name: 'rms',
    unit: 'um',
    axisUnit: 'm',
    x: [1, 2],
    y: [10, 20],
    values: [1, 2, 3, 4],
  });

  assert.deepEqual(
    columns.map(({ values }) => values),
    [
      [10, 10, 20, 20],
      [1, 2, 1, 2],
      [1, 2, 3, 4],
    ],
  );
});

// The check value of CRC-32 over the nine digits, as every catalogue of CRCs lists it (from memory).
test('the CRC of a PNG chunk is CRC-32', () => {
  assert.equal(crc32(new TextEncoder().encode('123456789')), 0xcbf43926);
});

test('text put into a PNG leaves a file that is still a PNG and holds the text', () => {
  const chunk = (kind, data) => {
    const body = Buffer.concat([Buffer.from(kind), data]),
      head = Buffer.alloc(4),
      tail = Buffer.alloc(4);
    head.writeUInt32BE(data.length);
    tail.writeUInt32BE(zlib.crc32 ? zlib.crc32(body) : crc32(body));
    return Buffer.concat([head, body, tail]);
  };
  const png = Buffer.concat([
    Buffer.from('89504e470d0a1a0a', 'hex'),
    chunk('IHDR', Buffer.from('00000001000000010800000000', 'hex')),
    chunk('IDAT', zlib.deflateSync(Buffer.from([0, 255]))),
    chunk('IEND', Buffer.alloc(0)),
  ]);

  const whole = Buffer.from(withText(png, 'Source', 'Bentlight · µm'));

  const kinds = [];
  for (let at = 8; at < whole.length; at += 12 + whole.readUInt32BE(at)) {
    const length = whole.readUInt32BE(at);
    assert.equal(whole.readUInt32BE(at + 8 + length), crc32(whole.subarray(at + 4, at + 8 + length)));
    kinds.push(whole.toString('latin1', at + 4, at + 8));
  }
  assert.deepEqual(kinds, ['IHDR', 'iTXt', 'IDAT', 'IEND']);
  assert.ok(whole.includes(Buffer.from('Bentlight · µm')));
});

test('addresses hold only what was given', () => {
  assert.equal(
    address('/v1/views/a/series', { bins: 400, from: null, quantity: 'signal:p q', remove: 'piston,tilt' }),
    '/v1/views/a/series?bins=400&quantity=signal:p%20q&remove=piston,tilt',
  );
});

test('names of files are plain', () => {
  assert.equal(
    fileStem('a/b c', 'field-of-regard', '0123456789abcdef', 'signal:p'),
    'a-b-c_field-of-regard_01234567_signal-p',
  );
});

test('no call lets an address break out of its quotes', () => {
  for (const { text } of callTexts({ url: "http://127.0.0.1/v1/views/x'; rm -rf y/series", arrays: [] }))
    assert.ok(!text.includes("x';"), text);
});

// NumPy writes them, we read them: a crossed round trip.
test('NPY files written by NumPy are read as they were', () => {
  const folder = mkdtempSync(path.join(tmpdir(), 'npy-'));
  try {
    const script = `import numpy as np
a = np.arange(24, dtype="<f4").reshape(2, 3, 4); a[0, 0, 0] = np.nan
np.save("a.npy", a); np.save("b.npy", np.linspace(0, 1, 5)); np.save("c.npy", a.T)`;
    execFileSync('/usr/bin/python3', ['-c', script], { cwd: folder });
    const read = (name) => {
      const file = readFileSync(path.join(folder, name));
      return file.buffer.slice(file.byteOffset, file.byteOffset + file.byteLength);
    };

    const a = parseNpy(read('a.npy'));
    assert.deepEqual(a.shape, [2, 3, 4]);
    assert.ok(Number.isNaN(a.data[0]));
    assert.deepEqual(
      [...a.data.subarray(1)],
      Array.from({ length: 23 }, (_, i) => i + 1),
    );
    assert.deepEqual([...parseNpy(read('b.npy')).data], [0, 0.25, 0.5, 0.75, 1]);
    assert.throws(() => parseNpy(read('c.npy')), /cannot read/); // column order, which the service never sends
    assert.throws(() => parseNpy(read('a.npy').slice(0, 150)), /cut short/);
    assert.throws(() => parseNpy(new ArrayBuffer(20)), /no NPY/);
  } finally {
    rmSync(folder, { recursive: true });
  }
});
