// A line plot as SVG nodes, from the same model as line_plot.js draws on the screen.

import { bottomAxis, leftAxis, ticksFor } from './axes.js';
import { extent, linearScale, logScale, paddedRange } from './scales.js';
import { decadeLabel, decadeTicks } from './ticks.js';
import { bandPath, linePath, svg } from './svg_tree.js';

/**
 * What a line plot shows. Every curve has as many values as x; null or NaN is a gap.
 *
 * @typedef {{
 *   x: {values: ArrayLike<number>, title: string, isLog?: boolean, range?: [number, number]},
 *   y: {title: string, isLog?: boolean, range?: [number, number]},
 *   curves: {name: string, values: ArrayLike<number>, dash?: number[], isWarm?: boolean, isThin?: boolean}[],
 *   bands: {name: string, low: ArrayLike<number>, high: ArrayLike<number>}[],
 *   mark?: ?{x: number, name: string}
 * }} LineModel
 */

/** Range of y over everything drawn; on a log axis over what is positive. @param {LineModel} model */
export function yRange(model) {
  if (model.y.range) return model.y.range;
  const all = [...model.curves.map(({ values }) => values), ...model.bands.flatMap(({ low, high }) => [low, high])];
  const ranges = all
    .map((values) => extent(model.y.isLog ? Array.from(values).filter((value) => value > 0) : values))
    .filter(Boolean);
  const range = extent(ranges.flat()) ?? [0, 1];
  return model.y.isLog ? [range[0] / 1.3, range[1] * 1.3] : paddedRange(range);
}

/** Range of x: the one asked for, or that of the values. */
export const xRange = (model) => model.x.range ?? extent(model.x.values) ?? [0, 1];

function axisTicks(range, isLog, length, perTick) {
  if (!isLog) return ticksFor(range, length, perTick);
  const ticks = decadeTicks(range[0], range[1], Math.max(2, length / perTick));
  return { ticks, labels: ticks.map(decadeLabel) };
}

/** @param {LineModel} model */
export function lineNodes(model, { width, height, palette }) {
  const box = { left: 62, top: 30, right: width - 18, bottom: height - 44 };
  const xs = (model.x.isLog ? logScale : linearScale)(xRange(model), [box.left, box.right]);
  const ys = (model.y.isLog ? logScale : linearScale)(yRange(model), [box.bottom, box.top]);
  const clip = 'area';
  return [
    svg(
      'defs',
      {},
      svg(
        'clipPath',
        { id: clip },
        svg('rect', { x: box.left, y: box.top, width: box.right - box.left, height: box.bottom - box.top }),
      ),
    ),
    leftAxis(box, ys, axisTicks(ys.domain, model.y.isLog, box.bottom - box.top, 44), model.y.title, palette, {
      grid: true,
    }),
    bottomAxis(box, xs, axisTicks(xs.domain, model.x.isLog, box.right - box.left, 90), model.x.title, palette),
    svg(
      'g',
      { 'clip-path': `url(#${clip})`, fill: 'none', 'stroke-linejoin': 'round' },
      model.bands.map(({ low, high }) =>
        svg('path', { d: bandPath(model.x.values, low, high, xs, ys), fill: palette.band }),
      ),
      model.curves.map(({ values, dash, isWarm, isThin }) =>
        svg('path', {
          d: linePath(model.x.values, values, xs, ys),
          stroke: isWarm ? palette.warm : palette.line,
          'stroke-width': isThin ? 0.75 : 1.5,
          'stroke-dasharray': dash ? dash.join(' ') : null,
        }),
      ),
      model.mark &&
        svg('path', {
          d: `M${xs.at(model.mark.x).toFixed(1)} ${box.top}V${box.bottom}`,
          stroke: palette.warm,
          'stroke-dasharray': '2 3',
        }),
    ),
    legendNodes(model, box, palette),
  ];
}

function legendNodes(model, box, palette) {
  const entries = [
    ...model.curves.map((curve) => ({
      name: curve.name,
      dash: curve.dash,
      colour: curve.isWarm ? palette.warm : palette.line,
    })),
    ...model.bands.map((band) => ({ name: band.name, colour: palette.band, isBand: true })),
  ];
  let x = box.right;
  // Laid out from the right by a rough width of the text; the file has no means to measure it.
  return entries.reverse().map(({ name, dash, colour, isBand }) => {
    x -= name.length * 6.6 + 46;
    return svg(
      'g',
      { transform: `translate(${x.toFixed(0)} 14)`, fill: palette.soft },
      isBand
        ? svg('rect', { x: 0, y: -8, width: 20, height: 9, fill: colour })
        : svg('path', {
            d: 'M0 -4h20',
            stroke: colour,
            'stroke-width': 1.5,
            'stroke-dasharray': dash ? dash.join(' ') : null,
            fill: 'none',
          }),
      svg('text', { x: 25, y: 0 }, name),
    );
  });
}
