// Getting things out: numbers as CSV, pictures as SVG and PNG, and the call that gives the same without the page.

import { plainNumber } from './numbers.js';
import { toDocument } from './plots/svg_tree.js';

/**
 * @typedef {{name: string, unit: string, values: ArrayLike<?number|string>}} Column
 * @typedef {{columns: Column[]}} Table
 * @typedef {{width: number, height: number, nodes: object[], title: string, palette: object}} Drawing
 */

const quoted = (text) => (/[",\r\n]/.test(text) ? `"${text.replaceAll('"', '""')}"` : text);
const heading = ({ name, unit }) => quoted(unit && unit !== '1' ? `${name} (${unit})` : name);
const field = (value) => (typeof value === 'string' ? quoted(value) : plainNumber(value));

/**
 * Columns as CSV (RFC 4180) under lines of provenance that begin with #.
 *
 * @param {Table} table
 * @param {string[]} lines
 */
export function csvText({ columns }, lines) {
  const rows = Math.max(0, ...columns.map(({ values }) => values.length));
  const text = [...lines.map((line) => `# ${line}`), columns.map(heading).join(',')];
  for (let row = 0; row < rows; ++row) text.push(columns.map(({ values }) => field(values[row])).join(','));
  return `${text.join('\r\n')}\r\n`;
}

/** A map as columns y, x, value: the form every program can read. @returns {Table} */
export function mapTable({ name, unit, axisUnit, x, y, values }) {
  const ys = [],
    xs = [];
  for (const yValue of y) {
    for (const xValue of x) {
      ys.push(yValue);
      xs.push(xValue);
    }
  }
  return {
    columns: [
      { name: 'y', unit: axisUnit, values: ys },
      { name: 'x', unit: axisUnit, values: xs },
      { name, unit, values },
    ],
  };
}

/** A picture with its title on top and where it came from beneath. @param {Drawing} drawing @param {string[]} lines */
export function svgDocument(drawing, lines) {
  const { height, nodes, title, palette } = drawing;
  const side = 10,
    width = drawing.width + 2 * side;
  const head = 34,
    foot = 14 * Math.min(lines.length, 3) + 14;
  const whole = head + height + foot;
  const text = (y, size, fill, content) => ({
    name: 'text',
    attributes: { x: 12, y, 'font-size': size, fill },
    children: [content],
  });
  const children = [
    { name: 'rect', attributes: { width, height: whole, fill: palette.sheet }, children: [] },
    text(22, 14, palette.ink, fitting(title, width, 7)),
    {
      name: 'g',
      attributes: { transform: `translate(${side} ${head})` },
      children: nodes.flat(Infinity).filter(Boolean),
    },
    ...lines
      .slice(0, 3)
      .map((line, i) => text(head + height + 14 * (i + 1), 9, palette.soft, fitting(line, width, 4.6))),
  ];
  return { text: toDocument(width, whole, children, { title, lines }), width, height: whole };
}

/** Text shortened to what fits into the width at about `each` pixels a letter. */
function fitting(text, width, each) {
  const room = Math.floor((width - 24) / each);
  return text.length <= room ? text : `${text.slice(0, room - 1)}…`;
}

/** The picture at twice its size, with the lines of provenance inside the file. @returns {Promise<Blob>} */
export async function pngBlob({ text, width, height }, lines) {
  const address = URL.createObjectURL(new Blob([text], { type: 'image/svg+xml' }));
  try {
    const image = new Image();
    image.src = address;
    await image.decode();
    const canvas = document.createElement('canvas');
    canvas.width = 2 * width;
    canvas.height = 2 * height;
    const context = canvas.getContext('2d');
    context.imageSmoothingEnabled = false;
    context.drawImage(image, 0, 0, canvas.width, canvas.height);
    const blob = await new Promise((resolve) => canvas.toBlob(resolve, 'image/png'));
    return new Blob([withText(new Uint8Array(await blob.arrayBuffer()), 'Source', lines.join('\n'))], {
      type: 'image/png',
    });
  } finally {
    URL.revokeObjectURL(address);
  }
}

/** CRC of a PNG chunk (ISO 15948, annex D). */
export function crc32(bytes) {
  let crc = 0xffffffff;
  for (const byte of bytes) {
    crc ^= byte;
    for (let bit = 0; bit < 8; ++bit) crc = (crc >>> 1) ^ (crc & 1 ? 0xedb88320 : 0);
  }
  return (crc ^ 0xffffffff) >>> 0;
}

/** A PNG with an iTXt chunk right after its header (ISO 15948, 11.3.4.5). @param {Uint8Array} png */
export function withText(png, keyword, text) {
  const encode = new TextEncoder();
  const body = new Uint8Array([
    ...encode.encode('iTXt'),
    ...encode.encode(keyword),
    0,
    0,
    0,
    0,
    0,
    ...encode.encode(text),
  ]);
  const chunk = new Uint8Array(body.length + 8);
  const view = new DataView(chunk.buffer);
  view.setUint32(0, body.length - 4);
  chunk.set(body, 4);
  view.setUint32(4 + body.length, crc32(body));
  const afterHeader = 33; // signature 8, IHDR 25
  const whole = new Uint8Array(png.length + chunk.length);
  whole.set(png.subarray(0, afterHeader));
  whole.set(chunk, afterHeader);
  whole.set(png.subarray(afterHeader), afterHeader + chunk.length);
  return whole;
}

/**
 * The call that made a plot, ready to paste.
 *
 * @param {{url: string, arrays: {name: string, dimensions: number}[]}} call  url: the whole address
 * @returns {{name: string, text: string}[]}
 */
export function callTexts({ url, arrays }) {
  const safe = url.replaceAll("'", '%27');
  return [
    { name: 'curl', text: `curl --fail --header 'Prefer: wait=60' '${safe}'` },
    { name: 'Python', text: pythonCall(safe, arrays) },
    { name: 'Octave', text: octaveCall(safe, arrays) },
  ];
}

function pythonCall(url, arrays) {
  return [
    'import json',
    'import urllib.request',
    '',
    'import numpy as np',
    '',
    'request = urllib.request.Request(',
    `    "${url}",`,
    '    headers={"Prefer": "wait=60"})  # long work: wait for it',
    'with urllib.request.urlopen(request) as reply:',
    '    result = json.load(reply)',
    'arrays = {name: np.array(array["data"], dtype=float).reshape(array["shape"])',
    '          for name, array in result["arrays"].items()}',
    ...arrays.map(({ name }) => `${name} = arrays["${name}"]  # in result["arrays"]["${name}"]["unit"]`),
  ].join('\n');
}

function octaveCall(url, arrays) {
  return [
    `result = jsondecode(urlread("${url}"));`,
    ...arrays.map(({ name, dimensions }) =>
      dimensions < 2
        ? `${name} = result.arrays.${name}.data;`
        : `${name} = permute(reshape(result.arrays.${name}.data, flip(result.arrays.${name}.shape(:).')), ${dimensions}:-1:1);`,
    ),
  ].join('\n');
}

/** A name for a file: view, analysis and the beginning of the digest, in characters every system takes. */
export function fileStem(subject, analysis, digest, what = '') {
  return [subject, analysis, digest?.slice(0, 8), what]
    .filter(Boolean)
    .join('_')
    .replace(/[^A-Za-z0-9._-]+/g, '-');
}

/** Hands a file to the browser's own saving. @param {Blob} blob */
export function saveFile(name, blob) {
  const address = URL.createObjectURL(blob);
  const link = document.createElement('a');
  link.href = address;
  link.download = name;
  link.click();
  // The download has taken hold of the address by the next turn; a minute is generous for slow disks.
  setTimeout(() => URL.revokeObjectURL(address), 60000);
}
