// A histogram with a fitted curve over it, as SVG.

import { bottomAxis, leftAxis, ticksFor } from './axes.js';
import { livePalette } from './palette.js';
import { extent, linearScale, niceAbove } from './scales.js';
import { linePath, svg, toElement } from './svg_tree.js';

/**
 * @typedef {{low: ArrayLike<number>, high: ArrayLike<number>, count: ArrayLike<number>, fit: ?ArrayLike<number>,
 *            xTitle: string, yTitle: string, marks: {x: number, name: string}[]}} HistogramModel
 */

function layoutOf(model, width, height) {
  const box = { left: 62, top: 30, right: width - 16, bottom: height - 44 };
  const most = Math.max(extent(model.count)?.[1] ?? 1, model.fit ? (extent(model.fit)?.[1] ?? 0) : 0);
  return {
    box,
    xs: linearScale([model.low[0], model.high[model.high.length - 1]], [box.left, box.right]),
    ys: linearScale([0, niceAbove(most * 1.02)], [box.bottom, box.top]),
  };
}

/** @param {HistogramModel} model */
export function histogramNodes(model, { width, height, palette }) {
  const { box, xs, ys } = layoutOf(model, width, height);
  const centres = Array.from(model.low, (low, i) => (low + model.high[i]) / 2);
  const bars = Array.from(model.count, (count, i) => {
    const left = xs.at(model.low[i]),
      right = xs.at(model.high[i]);
    return svg('rect', {
      class: 'bar',
      'data-bin': i,
      x: (left + 0.5).toFixed(1),
      y: ys.at(count ?? 0).toFixed(1),
      width: Math.max(0.5, right - left - 1).toFixed(1),
      height: (box.bottom - ys.at(count ?? 0)).toFixed(1),
      fill: palette.fill,
    });
  });
  return [
    leftAxis(box, ys, ticksFor(ys.domain, box.bottom - box.top, 44), model.yTitle, palette, { grid: true }),
    bars,
    model.fit &&
      svg('path', {
        d: linePath(centres, model.fit, xs, ys),
        fill: 'none',
        stroke: palette.warm,
        'stroke-width': 1.75,
        'stroke-dasharray': '7 3',
      }),
    model.marks.map(({ x, name }) => {
      const at = xs.at(x),
        isLate = at > (box.left + box.right) / 2;
      return [
        svg('path', {
          d: `M${at.toFixed(1)} ${box.top - 4}V${box.bottom}`,
          stroke: palette.ink,
          'stroke-width': 1,
          'stroke-dasharray': '1 3',
        }),
        svg(
          'text',
          {
            x: (at + (isLate ? -5 : 5)).toFixed(1),
            y: box.top + 6,
            fill: palette.ink,
            'text-anchor': isLate ? 'end' : 'start',
          },
          name,
        ),
      ];
    }),
    bottomAxis(box, xs, ticksFor(xs.domain, box.right - box.left, 76), model.xTitle, palette),
  ];
}

/**
 * A living histogram inside `root`; arrow keys walk along its bins.
 *
 * @param {{height: number, label: string, onCursor: (bin: ?number) => void}} options
 */
export function histogram(root, { height, label, onCursor }) {
  const host = document.createElement('div');
  host.className = 'histogram';
  root.append(host);

  /** @type {?HistogramModel} */
  let model = null;
  let cursor = null;
  let placedWidth = 0;
  const widthNow = () => Math.max(220, Math.floor(host.clientWidth));

  function place() {
    if (!model) return;
    placedWidth = widthNow();
    const nodes = histogramNodes(model, { width: placedWidth, height, palette: livePalette });
    host.replaceChildren(
      toElement(
        svg(
          'svg',
          { width: placedWidth, height, viewBox: `0 0 ${placedWidth} ${height}`, 'aria-hidden': 'true' },
          nodes,
        ),
      ),
    );
    for (const bar of host.querySelectorAll('.bar')) {
      bar.addEventListener('pointerenter', () => moveTo(Number(bar.dataset.bin)));
    }
    showCursor();
  }

  function showCursor() {
    host.querySelector('.bar.is-current')?.classList.remove('is-current');
    if (cursor !== null) host.querySelector(`.bar[data-bin="${cursor}"]`)?.classList.add('is-current');
    host.tabIndex = 0;
    host.setAttribute('role', 'slider');
    host.setAttribute('aria-label', label);
    host.setAttribute('aria-valuemin', '0');
    host.setAttribute('aria-valuemax', String(model.count.length - 1));
    host.setAttribute('aria-valuenow', String(cursor ?? 0));
    host.setAttribute('aria-valuetext', `bin ${cursor ?? 0} of ${model.count.length}`);
  }

  function moveTo(bin) {
    cursor = Math.min(model.count.length - 1, Math.max(0, bin));
    showCursor();
    onCursor(cursor);
  }

  const keys = {
    ArrowLeft: (event) => moveTo((cursor ?? 0) - (event.shiftKey ? 10 : 1)),
    ArrowRight: (event) => moveTo((cursor ?? -1) + (event.shiftKey ? 10 : 1)),
    Home: () => moveTo(0),
    End: () => moveTo(model.count.length - 1),
  };
  host.addEventListener('keydown', (event) => {
    if (!model || !(event.key in keys) || event.ctrlKey || event.metaKey || event.altKey) return;
    event.preventDefault();
    keys[event.key](event);
  });
  host.addEventListener('pointerleave', () => {
    if (host === document.activeElement || !model) return;
    cursor = null;
    showCursor();
    onCursor(null);
  });

  const resize = new ResizeObserver(() => widthNow() !== placedWidth && place());
  resize.observe(host);

  return {
    /** @param {HistogramModel} next */
    draw(next) {
      if (model && next.count.length !== model.count.length) cursor = null;
      model = next;
      place();
    },
    destroy() {
      resize.disconnect();
      host.remove();
    },
  };
}
