// Axes, grid and colour bar as SVG nodes: the same for screen and file.

import { hexColour, tableSize } from './colour_maps.js';
import { linearScale } from './scales.js';
import { linearTicks, tickLabels } from './ticks.js';
import { svg } from './svg_tree.js';

/** @typedef {{left: number, top: number, right: number, bottom: number}} Box  edges of the plotting area in pixels */

const tickLength = 4;

/** Ticks and their labels for a linear axis that is `length` pixels long. */
export function ticksFor([low, high], length, perTick = 70) {
  const ticks = linearTicks(low, high, Math.max(2, Math.floor(length / perTick)));
  return { ticks, labels: tickLabels(ticks) };
}

/** Pixels for each tick of an upright axis: a short one may be denser than a long one. */
export const roomFor = (length) => (length < 220 ? 32 : 48);

/** The axis below `box`. @param {Box} box */
export function bottomAxis(box, scale, { ticks, labels }, title, palette) {
  return svg(
    'g',
    { fill: palette.soft, 'text-anchor': 'middle', 'aria-hidden': 'true' },
    svg('path', { d: `M${box.left} ${box.bottom + 0.5}H${box.right}`, stroke: palette.rule, fill: 'none' }),
    ticks.map((tick, i) => [
      svg('path', { d: `M${scale.at(tick).toFixed(1)} ${box.bottom}v${tickLength}`, stroke: palette.rule }),
      svg('text', { x: scale.at(tick).toFixed(1), y: box.bottom + 17 }, labels[i]),
    ]),
    svg('text', { x: (box.left + box.right) / 2, y: box.bottom + 34, fill: palette.ink }, title),
  );
}

/** The axis left of `box`, its title above it, where it is read without turning one's head. */
export function leftAxis(box, scale, { ticks, labels }, title, palette, { grid = false } = {}) {
  return svg(
    'g',
    { fill: palette.soft, 'text-anchor': 'end', 'aria-hidden': 'true' },
    ticks.map((tick, i) => {
      const y = scale.at(tick).toFixed(1);
      return [
        grid && svg('path', { d: `M${box.left} ${y}H${box.right}`, stroke: palette.grid, fill: 'none' }),
        svg('path', { d: `M${box.left - tickLength} ${y}H${box.left}`, stroke: palette.rule }),
        svg('text', { x: box.left - 7, y, dy: '0.35em' }, labels[i]),
      ];
    }),
    svg('path', { d: `M${box.left - 0.5} ${box.top}V${box.bottom}`, stroke: palette.rule, fill: 'none' }),
    title &&
      svg(
        'text',
        { x: box.left - 7, y: box.top - 9, fill: palette.ink, 'text-anchor': 'start', dx: -box.left + 9 },
        title,
      ),
  );
}

/**
 * A colour bar right of a map, with its limits, and a mark at the ends beyond which numbers were cut off.
 *
 * @param {{x: number, top: number, bottom: number}} place
 * @param {{map: object, low: number, high: number, title: string, isCutLow?: boolean, isCutHigh?: boolean}} bar
 */
export function colourBar(place, bar, palette, id) {
  const width = 12;
  const scale = linearScale([bar.low, bar.high], [place.bottom, place.top]);
  const { ticks, labels } = ticksFor([bar.low, bar.high], place.bottom - place.top, roomFor(place.bottom - place.top));
  const steps = 32;
  const stops = Array.from({ length: steps + 1 }, (_, i) =>
    svg('stop', {
      offset: `${((100 * i) / steps).toFixed(2)}%`,
      'stop-color': hexColour(bar.map, Math.round((i * (tableSize - 1)) / steps)),
    }),
  );
  const tip = (y, direction) => `M${place.x} ${y}h${width}l${-width / 2} ${direction * 8}Z`;
  return svg(
    'g',
    { fill: palette.soft, 'aria-hidden': 'true' },
    svg('defs', {}, svg('linearGradient', { id, x1: 0, x2: 0, y1: 1, y2: 0 }, stops)),
    svg('rect', {
      x: place.x,
      y: place.top,
      width,
      height: place.bottom - place.top,
      fill: `url(#${id})`,
      stroke: palette.rule,
      'stroke-width': 0.5,
    }),
    bar.isCutHigh &&
      svg('path', {
        d: tip(place.top - 2, -1),
        fill: hexColour(bar.map, tableSize - 1),
        stroke: palette.ink,
        'stroke-width': 0.75,
      }),
    bar.isCutLow &&
      svg('path', {
        d: tip(place.bottom + 2, 1),
        fill: hexColour(bar.map, 0),
        stroke: palette.ink,
        'stroke-width': 0.75,
      }),
    ticks.map((tick, i) => [
      svg('path', { d: `M${place.x + width} ${scale.at(tick).toFixed(1)}h3`, stroke: palette.rule }),
      svg('text', { x: place.x + width + 6, y: scale.at(tick).toFixed(1), dy: '0.35em' }, labels[i]),
    ]),
    svg('text', { x: place.x, y: place.top - 12, fill: palette.ink }, bar.title),
  );
}
