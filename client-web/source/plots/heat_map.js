// A map of numbers over a plane as an image: our own painter, one table look-up per point.

import { bottomAxis, colourBar, leftAxis, ticksFor } from './axes.js';
import { tableIndex, tableSize } from './colour_maps.js';
import { livePalette } from './palette.js';
import { linearScale } from './scales.js';
import { svg, toElement } from './svg_tree.js';

/**
 * @typedef {{
 *   values: ArrayLike<number>, rows: number, columns: number,
 *   x: ArrayLike<number>, y: ArrayLike<number>, axisUnit: string,
 *   map: object, low: number, high: number, barTitle: string
 * }} MapModel  values row-major [rows][columns]; null or NaN: nothing is there
 */

/**
 * Paints the numbers into a canvas of the map's own size. y points up; what is no number stays transparent, so that the
 * page shows through in every theme.
 *
 * @param {HTMLCanvasElement} canvas
 * @param {MapModel} model
 */
export function paint(canvas, model) {
  const { values, rows, columns, low, high } = model;
  if (canvas.width !== columns || canvas.height !== rows) {
    canvas.width = columns;
    canvas.height = rows;
  }
  const context = canvas.getContext('2d', { willReadFrequently: false });
  const image = context.createImageData(columns, rows);
  const pixels = new Uint32Array(image.data.buffer);
  const table = model.map.pixels;
  const scale = high > low ? (tableSize - 1) / (high - low) : 0;
  const isUpward = rows < 2 || model.y[rows - 1] > model.y[0];
  const isRightward = columns < 2 || model.x[columns - 1] > model.x[0];
  for (let row = 0; row < rows; ++row) {
    const line = (isUpward ? rows - 1 - row : row) * columns;
    for (let column = 0; column < columns; ++column) {
      const value = values[line + (isRightward ? column : columns - 1 - column)];
      if (value === null || value !== value) continue;
      const index = Math.round((value - low) * scale);
      pixels[row * columns + column] = table[index < 0 ? 0 : index >= tableSize ? tableSize - 1 : index];
    }
  }
  context.putImageData(image, 0, 0);
}

/** Which ends of the colour bar hide numbers. @param {MapModel} model */
export function cutEnds({ values, low, high }) {
  let isCutLow = false,
    isCutHigh = false;
  // A step of the table is 1/255 of the span; half of one beyond the end nobody can see.
  const slack = (high - low) / 510;
  for (const value of values) {
    if (value === null) continue;
    if (value < low - slack) isCutLow = true;
    if (value > high + slack) isCutHigh = true;
  }
  return { isCutLow, isCutHigh };
}

/** Half a step beyond the outermost points: where the picture's edge is. */
function edges(coordinates) {
  const last = coordinates.length - 1;
  const half = last > 0 ? Math.abs(coordinates[last] - coordinates[0]) / last / 2 : 0.5;
  return [Math.min(coordinates[0], coordinates[last]) - half, Math.max(coordinates[0], coordinates[last]) + half];
}

/** Where everything goes in a picture of `width` pixels; the aperture keeps its aspect ratio. @param {MapModel} model */
function layoutOf(model, width, greatestHeight = Infinity) {
  const [left, right] = edges(model.x),
    [bottom, top] = edges(model.y);
  const margins = { left: 44, right: 62, top: 26, bottom: 42 };
  const aspect = (top - bottom) / (right - left) || 1;
  const across = Math.max(
    60,
    Math.min(width - margins.left - margins.right, (greatestHeight - margins.top - margins.bottom) / aspect),
  );
  const box = {
    left: margins.left,
    top: margins.top,
    right: margins.left + across,
    bottom: margins.top + across * aspect,
  };
  return {
    box,
    height: box.bottom + margins.bottom,
    xs: linearScale([left, right], [box.left, box.right]),
    ys: linearScale([bottom, top], [box.bottom, box.top]),
  };
}

function surroundings(model, layout, palette, id) {
  const { box, xs, ys } = layout;
  return [
    leftAxis(box, ys, ticksFor(ys.domain, box.bottom - box.top, 40), `y (${model.axisUnit})`, palette),
    bottomAxis(box, xs, ticksFor(xs.domain, box.right - box.left, 54), `x (${model.axisUnit})`, palette),
    colourBar(
      { x: box.right + 14, top: box.top, bottom: box.bottom },
      { map: model.map, low: model.low, high: model.high, title: model.barTitle, ...cutEnds(model) },
      palette,
      id,
    ),
  ];
}

/** The map as nodes for a file. @param {MapModel} model */
export function mapNodes(model, { width, palette }) {
  const layout = layoutOf(model, width);
  const canvas = document.createElement('canvas');
  paint(canvas, model);
  const { box } = layout;
  const nodes = [
    svg('image', {
      x: box.left,
      y: box.top,
      width: box.right - box.left,
      height: box.bottom - box.top,
      preserveAspectRatio: 'none',
      'image-rendering': 'pixelated',
      href: canvas.toDataURL('image/png'),
    }),
    surroundings(model, layout, palette, 'bar'),
  ];
  return { nodes, height: layout.height };
}

let mapCount = 0;

/**
 * A map inside `root` with a cursor for mouse and arrow keys.
 *
 * @param {{label: string, onCursor: (point: ?{row: number, column: number}) => void,
 *          keys?: Object<string, (event: KeyboardEvent) => void>}} options
 *        keys: more of them, pressed while the map has the focus
 */
export function heatMap(root, { label, onCursor, keys: moreKeys = {} }) {
  const host = document.createElement('div');
  host.className = 'heat-map';
  host.tabIndex = 0;
  host.setAttribute('role', 'application');
  host.setAttribute('aria-roledescription', 'map');
  host.setAttribute('aria-label', label);
  const canvas = document.createElement('canvas');
  canvas.setAttribute('aria-hidden', 'true');
  host.append(canvas);
  root.append(host);

  const barId = `bar-${++mapCount}`;
  /** @type {?MapModel} */
  let model = null;
  let layout = null;
  let overlay = null;
  let cross = null;
  let point = null;
  let placedWidth = 0;

  const widthNow = () => Math.max(160, Math.floor(host.clientWidth));

  function place() {
    if (!model) return;
    const width = widthNow();
    placedWidth = width;
    layout = layoutOf(model, width, 460);
    const { box, height } = layout;
    host.style.blockSize = `${height}px`;
    canvas.style.left = `${box.left}px`;
    canvas.style.top = `${box.top}px`;
    canvas.style.width = `${box.right - box.left}px`;
    canvas.style.height = `${box.bottom - box.top}px`;
    overlay?.remove();
    cross = toElement(svg('path', { class: 'cross', fill: 'none' }));
    overlay = toElement(
      svg(
        'svg',
        { width, height, viewBox: `0 0 ${width} ${height}`, 'aria-hidden': 'true' },
        surroundings(model, layout, livePalette, barId),
      ),
    );
    overlay.append(cross);
    host.append(overlay);
    drawCross();
  }

  function drawCross() {
    if (!point || !cross) return cross?.setAttribute('d', '');
    const { box, xs, ys } = layout;
    const x = xs.at(model.x[point.column]).toFixed(1),
      y = ys.at(model.y[point.row]).toFixed(1);
    cross.setAttribute('d', `M${box.left} ${y}H${box.right}M${x} ${box.top}V${box.bottom}`);
  }

  function moveTo(row, column) {
    point = {
      row: Math.min(model.rows - 1, Math.max(0, row)),
      column: Math.min(model.columns - 1, Math.max(0, column)),
    };
    drawCross();
    onCursor(point);
  }

  const nearest = (coordinates, value) => {
    let best = 0;
    for (let i = 1; i < coordinates.length; ++i) {
      if (Math.abs(coordinates[i] - value) < Math.abs(coordinates[best] - value)) best = i;
    }
    return best;
  };
  canvas.addEventListener('pointermove', (event) => {
    if (!model) return;
    const area = canvas.getBoundingClientRect();
    const x = layout.xs.invert(layout.box.left + event.clientX - area.left);
    const y = layout.ys.invert(layout.box.top + event.clientY - area.top);
    moveTo(nearest(model.y, y), nearest(model.x, x));
  });
  canvas.addEventListener('pointerleave', () => {
    if (host === document.activeElement) return;
    point = null;
    drawCross();
    onCursor(null);
  });

  /** Moves by what the eye sees: up is up, whichever way the rows are numbered. */
  function step(right, up) {
    const here = point ?? { row: Math.floor(model.rows / 2), column: Math.floor(model.columns / 2) };
    if (!point) return moveTo(here.row, here.column);
    const rowSign = model.y[model.rows - 1] > model.y[0] ? 1 : -1;
    const columnSign = model.x[model.columns - 1] > model.x[0] ? 1 : -1;
    moveTo(here.row + up * rowSign, here.column + right * columnSign);
  }
  const keys = {
    ArrowLeft: (event) => step(event.shiftKey ? -5 : -1, 0),
    ArrowRight: (event) => step(event.shiftKey ? 5 : 1, 0),
    ArrowUp: (event) => step(0, event.shiftKey ? 5 : 1),
    ArrowDown: (event) => step(0, event.shiftKey ? -5 : -1),
    Home: () => step(-model.columns, 0),
    End: () => step(model.columns, 0),
    Escape: () => {
      point = null;
      drawCross();
      onCursor(null);
    },
    ...moreKeys,
  };
  host.addEventListener('keydown', (event) => {
    if (!model || !(event.key in keys) || event.ctrlKey || event.metaKey || event.altKey) return;
    event.preventDefault();
    keys[event.key](event);
  });

  const resize = new ResizeObserver(() => widthNow() !== placedWidth && place());
  resize.observe(host);

  return {
    /** Shows another model. @param {MapModel} next */
    draw(next) {
      const isSamePlace = model && next.rows === model.rows && next.columns === model.columns;
      if (!isSamePlace) point = null;
      model = next;
      paint(canvas, model);
      place();
      if (point) onCursor(point);
    },
    /** Other numbers on the same place and with the same limits: pixels only, for playing. */
    repaintValues(values) {
      model = { ...model, values };
      paint(canvas, model);
      if (point) onCursor(point);
    },
    /** Place of the cursor, if it has one. */
    get point() {
      return point;
    },
    destroy() {
      resize.disconnect();
      host.remove();
    },
  };
}

/** Colour of a number in a model, as an index of its table. */
export const colourIndex = (model, value) => tableIndex(value, model.low, model.high);
