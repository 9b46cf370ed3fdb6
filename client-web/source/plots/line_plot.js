// Line plots on the screen: the one module that knows the plotting library. Everybody else speaks LineModel.

import uPlot from '../../vendor/uPlot.esm.js';
import { xRange, yRange } from './line_svg.js';
import { canvasPalette } from './palette.js';
import { zoomedRange } from './scales.js';
import { decadeLabel, tickLabels } from './ticks.js';

const clickSlack = 4; // pixels that a hand may move between press and release of a click

function axisOf({ title, isLog }, palette, size, isTitled) {
  return {
    ...(isTitled ? { label: title, labelSize: 20, labelFont: `12px ${fontOfPage()}` } : {}),
    font: `12px ${fontOfPage()}`,
    stroke: palette.soft,
    size,
    gap: 4,
    grid: { stroke: palette.grid, width: 1 },
    ticks: { stroke: palette.rule, width: 1, size: 4 },
    values: isLog
      ? (_, splits) =>
          splits.map((value) =>
            value > 0 && Number.isInteger(Number(Math.log10(value).toFixed(6))) ? decadeLabel(value) : '',
          )
      : (_, splits) => tickLabels(splits),
    ...(isLog ? { filter: (_, splits) => splits } : {}),
  };
}

const fontOfPage = () => getComputedStyle(document.body).fontFamily;

/** Curves and band edges in the library's order, and which pairs of them bound a band. */
function seriesOf(model, palette) {
  const series = [{}],
    data = [model.x.values],
    bands = [];
  for (const { low, high } of model.bands) {
    data.push(high, low);
    series.push(
      { stroke: palette.band, width: 1, points: { show: false } },
      { stroke: palette.band, width: 1, points: { show: false } },
    );
    bands.push({ series: [series.length - 2, series.length - 1], fill: palette.band }); // upper first, or nothing is drawn
  }
  for (const { values, dash, isWarm, isThin } of model.curves) {
    data.push(values);
    series.push({
      stroke: isWarm ? palette.warm : palette.line,
      width: isThin ? 0.75 : 1.5,
      dash,
      points: { show: false },
    });
  }
  return { series, data, bands };
}

/**
 * A line plot inside `root`.
 *
 * @param {HTMLElement} root  its width decides the plot's; it gets the keys
 * @param {{height: number, label: string,
 *          onCursor: (index: ?number, isByKey: boolean) => void,
 *          onPick?: (x: number) => void, onZoom?: (range: ?[number, number]) => void,
 *          zoomRange?: () => [number, number]}} options
 *        onZoom gets null for "all of it"; zoomRange tells what is asked for by now, which may not be drawn yet
 */
export function linePlot(
  root,
  { height, label, onCursor, onPick = null, onZoom = null, zoomRange = () => xRange(model) },
) {
  const host = document.createElement('div');
  host.className = 'line-plot';
  // The name of y stands above the plot, where it is read without turning one's head.
  const yTitle = document.createElement('p');
  yTitle.className = 'axis-title';
  root.append(yTitle, host);

  /** @type {?import('./line_svg.js').LineModel} */
  let model = null;
  let plot = null;
  let cursor = null;

  const width = () => Math.max(200, Math.floor(host.clientWidth));
  const last = () => model.x.values.length - 1;

  function drawMark(chart, palette) {
    if (!model.mark) return;
    const [low, high] = xRange(model);
    if (model.mark.x < low || model.mark.x > high) return;
    const x = chart.valToPos(model.mark.x, 'x', true),
      { top, height: tall } = chart.bbox,
      context = chart.ctx;
    context.save();
    context.strokeStyle = palette.warm;
    context.lineWidth = 2 * devicePixelRatio;
    context.beginPath();
    context.moveTo(x, top);
    context.lineTo(x, top + tall);
    context.stroke();
    context.fillStyle = palette.warm;
    context.beginPath();
    const half = 5 * devicePixelRatio;
    context.moveTo(x - half, top);
    context.lineTo(x + half, top);
    context.lineTo(x, top + 1.6 * half);
    context.fill();
    context.restore();
  }

  function build() {
    plot?.destroy();
    plot = null;
    if (!model || model.x.values.length === 0) return;
    yTitle.textContent = model.y.title;
    const palette = canvasPalette(host);
    const { series, data, bands } = seriesOf(model, palette);
    const [yLow, yHigh] = yRange(model);
    plot = new uPlot(
      {
        width: width(),
        height,
        series,
        bands,
        padding: [8, 22, 0, 0],
        legend: { show: false },
        scales: {
          x: { time: false, distr: model.x.isLog ? 3 : 1, range: () => xRange(model) },
          y: { distr: model.y.isLog ? 3 : 1, range: () => [yLow, yHigh] },
        },
        axes: [axisOf(model.x, palette, 34, true), axisOf(model.y, palette, 54, false)],
        cursor: {
          y: false,
          drag: { x: Boolean(onZoom), y: false, setScale: false, dist: clickSlack },
          points: { size: 6 },
          bind: { dblclick: () => null },
        },
        hooks: {
          draw: [(chart) => drawMark(chart, palette)],
          setCursor: [(chart) => moved(chart.cursor.idx, false)],
          setSelect: [(chart) => selected(chart)],
        },
      },
      data,
      host,
    );
    listenForClicks(plot.over);
    // Before there are data there is nothing to walk along.
    host.tabIndex = 0;
    host.setAttribute('role', 'slider');
    host.setAttribute('aria-label', label);
    host.setAttribute('aria-valuemin', '0');
    host.setAttribute('aria-valuemax', String(last()));
    host.setAttribute('aria-valuenow', String(cursor ?? 0));
    host.setAttribute('aria-valuetext', cursor === null ? 'no cursor yet' : valueText(cursor));
  }

  const valueText = (index) => `${model.x.title}: ${model.x.values[index]}`;

  function moved(index, isByKey) {
    if (index === null || index === undefined) {
      onCursor(null, isByKey);
      return;
    }
    cursor = index;
    host.setAttribute('aria-valuenow', String(index));
    host.setAttribute('aria-valuetext', valueText(index));
    onCursor(index, isByKey);
  }

  function selected(chart) {
    const { left, width: wide } = chart.select;
    if (wide < clickSlack || !onZoom) return;
    const range = [chart.posToVal(left, 'x'), chart.posToVal(left + wide, 'x')];
    chart.setSelect({ left: 0, width: 0, top: 0, height: 0 }, false);
    onZoom(range);
  }

  function listenForClicks(over) {
    let start = null;
    over.addEventListener('mousedown', (event) => (start = event.clientX));
    over.addEventListener('click', (event) => {
      if (start === null || Math.abs(event.clientX - start) > clickSlack) return;
      onPick?.(plot.posToVal(event.clientX - over.getBoundingClientRect().left, 'x'));
    });
    over.addEventListener('dblclick', () => onZoom?.(null));
  }

  function moveTo(index) {
    const bounded = Math.min(last(), Math.max(0, index));
    plot.setCursor({ left: plot.valToPos(model.x.values[bounded], 'x'), top: plot.over.clientHeight / 2 }, false);
    moved(bounded, true);
  }

  const zoomBy = (factor) => {
    const bounds = model.x.bounds ?? xRange(model);
    onZoom?.(zoomedRange(zoomRange(), model.x.values[cursor ?? Math.floor(last() / 2)], factor, bounds));
  };

  const keys = {
    ArrowLeft: (event) => moveTo((cursor ?? 0) - (event.shiftKey ? 10 : 1)),
    ArrowRight: (event) => moveTo((cursor ?? -1) + (event.shiftKey ? 10 : 1)),
    PageDown: () => moveTo((cursor ?? 0) - Math.ceil(last() / 10)),
    PageUp: () => moveTo((cursor ?? 0) + Math.ceil(last() / 10)),
    Home: () => moveTo(0),
    End: () => moveTo(last()),
    Enter: () => cursor !== null && onPick?.(model.x.values[cursor]),
    '+': () => zoomBy(0.5),
    '=': () => zoomBy(0.5),
    '-': () => zoomBy(2),
    0: () => onZoom?.(null),
    Escape: () => {
      plot.setSelect({ left: 0, width: 0, top: 0, height: 0 }, false);
      onCursor(null, true);
    },
  };
  host.addEventListener('keydown', (event) => {
    if (!plot || !(event.key in keys) || event.ctrlKey || event.metaKey || event.altKey) return;
    event.preventDefault();
    keys[event.key](event);
  });

  const resize = new ResizeObserver(() => {
    if (plot && plot.width !== width()) plot.setSize({ width: width(), height });
  });
  resize.observe(host);

  return {
    /** Shows another model. @param {import('./line_svg.js').LineModel} next */
    draw(next) {
      const isSameShape = model && next.x.values.length === model.x.values.length;
      if (!isSameShape) cursor = null;
      model = next;
      build();
    },
    /** Moves the mark without drawing the curves anew from data. */
    mark(next) {
      if (!model || !plot) return;
      model = { ...model, mark: next };
      plot.redraw(false, false);
    },
    /** Draws again in the colours of now. */
    repaint: build,
    /** Pixels that one curve has room for. */
    columns: width,
    destroy() {
      resize.disconnect();
      plot?.destroy();
      yTitle.remove();
      host.remove();
    },
  };
}
