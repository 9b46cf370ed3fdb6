// A quantity against time: least, mean and greatest in each column of the plot. Zooming asks for finer columns.

import { address } from '../api.js';
import { element } from '../dom.js';
import { createFigure } from '../figure.js';
import { numberText, steppedText, wholeText } from '../numbers.js';
import { linePlot } from '../plots/line_plot.js';
import { lineNodes } from '../plots/line_svg.js';
import { paperPalette } from '../plots/palette.js';
import { labelOf, seriesQuantities } from '../quantities.js';
import { createQuestion } from '../question.js';
import { quantityText, withUnit } from '../units.js';
import { preparation } from '../view_state.js';

const binChoices = [400, 800, 1200, 1600, 2400]; // few, so that windows of similar width share one cached answer

/** Parameters of the question; a zoom narrows the window and leaves the preparation alone. */
function parametersOf(state, columns) {
  const parameters = {
    quantity: state.quantity,
    bins: binChoices.find((each) => each >= columns) ?? binChoices.at(-1),
    ...preparation(state),
  };
  if (state.zoom) {
    delete parameters.first;
    delete parameters.last;
    [parameters.from, parameters.to] = state.zoom.map(String);
  }
  return parameters;
}

/**
 * The columns of an answer: their instants, the number of the frame in the middle of each, how many frames there are, and
 * how many lie in one column.
 */
function columnsOf({ arrays, provenance }) {
  const { time, frame } = arrays;
  const { first, last } = provenance.preparation;
  const ends = [...frame.data.slice(1), last + 1];
  return {
    time: time.data,
    middles: frame.data.map((start, i) => (start + ends[i] - 1) / 2),
    frames: last - first + 1,
    perColumn: (last - first + 1) / frame.data.length,
  };
}

/** y at x along a rising line through points; null outside of them by more than the half of a step. */
function interpolated(xs, ys, x) {
  const last = xs.length - 1;
  if (last < 1) return xs[0] === x ? ys[0] : null;
  let k = xs.findIndex((value) => value >= x);
  if (k === -1) k = last;
  k = Math.max(1, k);
  const share = (x - xs[k - 1]) / (xs[k] - xs[k - 1]);
  return share < -0.5 || share > 1.5 ? null : ys[k - 1] + share * (ys[k] - ys[k - 1]);
}

const rounded = (value) => Number(value.toPrecision(8));

export function mount(root, { api, go }) {
  const figure = createFigure({ name: 'series', title: 'Against time' });
  root.append(figure.root);
  const quantity = element('select', { name: 'quantity', on: { change: () => go({ quantity: quantity.value }) } });
  const ends = ['from', 'to'].map((name) =>
    element('input', {
      type: 'number',
      step: 'any',
      'aria-label': `Shown ${name}, seconds`,
      on: { change: () => zoomByFields() },
    }),
  );
  const whole = element('button', { type: 'button', on: { click: () => go({ zoom: null }) } }, 'Whole record');
  const use = element('button', { type: 'button', on: { click: () => useAsWindow() } }, 'Use as window');
  figure.controls.append(
    element('label', {}, element('span', {}, 'Quantity'), quantity),
    element(
      'span',
      { class: 'limits', role: 'group', 'aria-label': 'Stretch of time that is shown' },
      element('span', { class: 'limits-label' }, 'Show'),
      ends[0],
      element('span', { 'aria-hidden': 'true' }, 'to'),
      ends[1],
      element('span', {}, 's'),
    ),
    whole,
    use,
  );
  let state = null,
    view = null,
    model = null,
    latest = null;
  const plot = linePlot(figure.picture, {
    height: 250,
    label: 'Against time. Arrow keys read values, plus and minus zoom, 0 shows all, Enter shows the frame.',
    onCursor: (index) => figure.read(index === null ? null : readingAt(index)),
    onPick: (time) => go({ frame: frameAt(time) }),
    onZoom: (range) => go({ zoom: range ? boundedZoom(range) : null }),
    zoomRange: () => state.zoom ?? recordRange(),
  });
  figure.setHint('Drag to zoom, double click for all of it; click to see the frame of that instant.');
  const question = createQuestion(api, figure);

  const recordRange = () => [
    view.start_s ?? 0,
    (view.start_s ?? 0) + (view.duration_s ?? view.frames / view.frame_rate_hz),
  ];

  /** At least four frames wide, and inside the record. */
  function boundedZoom([low, high]) {
    const least = 4 / view.frame_rate_hz,
      [start, end] = recordRange();
    const middle = (low + high) / 2,
      half = Math.max(high - low, least) / 2;
    const from = Math.max(start, middle - half),
      to = Math.min(end, middle + half);
    return to > from ? [rounded(from), rounded(to)] : null;
  }

  function zoomByFields() {
    const [from, to] = ends.map((input) => input.valueAsNumber);
    if (from < to) go({ zoom: boundedZoom([from, to]) });
  }

  function useAsWindow() {
    const [from, to] = state.zoom ?? [];
    if (from !== undefined) go({ from: String(from), to: String(to), first: null, last: null, zoom: null });
  }

  function readingAt(index) {
    const { time, low, high, mean } = latest.result.arrays;
    const unit = mean.unit;
    const at = `t = ${quantityText(steppedText(time.data[index], 0.2 / view.frame_rate_hz), time.unit)}`;
    if (mean.data[index] === null) return `${at}: no value`;
    if (low.data[index] === high.data[index]) return `${at}: ${quantityText(numberText(mean.data[index]), unit)}`;
    const span = `${numberText(low.data[index])} to ${numberText(high.data[index])}`;
    return `${at}: mean ${quantityText(numberText(mean.data[index]), unit)}, ${span}`;
  }

  function draw(answer) {
    latest = answer;
    const { time, low, high, mean } = answer.result.arrays;
    const label = labelOf(state.quantity);
    const { frames, perColumn } = columnsOf(answer.result);
    const isThinned = perColumn > 1;
    model = {
      x: { values: Float64Array.from(time.data), title: `Time (${time.unit})`, bounds: recordRange() },
      y: { title: withUnit(label, mean.unit) },
      curves: [{ name: isThinned ? 'mean' : label, values: mean.data }],
      bands: isThinned ? [{ name: 'least to greatest', low: low.data, high: high.data }] : [],
      mark: markOf(),
    };
    plot.draw(model);
    figure.setTitle(`${label} against time`);
    figure.setFinding(findingOf(perColumn, time, frames));
    figure.setWarnings(answer.result.warnings);
    const shown = state.zoom ?? [time.data[0], time.data.at(-1)];
    ends.forEach((input, i) => (input.value = String(Number(shown[i].toPrecision(6)))));
    figure.setOffer({
      answer,
      what: state.quantity.replaceAll(':', '-'),
      arrays: ['time', 'low', 'high', 'mean'],
      table: () => ({
        columns: ['time', 'low', 'high', 'mean'].map((name) => ({
          name,
          unit: answer.result.arrays[name].unit,
          values: answer.result.arrays[name].data,
        })),
      }),
      drawing: () => ({
        width: 960,
        height: 340,
        nodes: lineNodes(model, { width: 960, height: 340, palette: paperPalette }),
        title: `${label} against time, ${answer.result.subject}`,
        palette: paperPalette,
      }),
    });
  }

  /** Where the frame that is looked at lies in time, when it lies in what is drawn. */
  function markOf() {
    if (state.frame === null || !latest) return null;
    const { time, middles } = columnsOf(latest.result);
    const x = interpolated(middles, time, state.frame);
    return x === null ? null : { x, name: 'frame' };
  }

  /** Number of the frame nearest to an instant of the plot. */
  function frameAt(instant) {
    const { time, middles } = columnsOf(latest.result);
    const number = interpolated(time, middles, instant) ?? (instant < time[0] ? middles[0] : middles.at(-1));
    return Math.min(view.frames - 1, Math.max(0, Math.round(number)));
  }

  function findingOf(perColumn, time, frames) {
    const [start, end] = [time.data[0], time.data.at(-1)];
    const step = (end - start) / 200; // finer than a reader can tell apart on the axis
    const span = `${steppedText(start, step)} to ${quantityText(steppedText(end, step), time.unit)}`;
    if (perColumn <= 1) return `${wholeText(frames)} frames, every one drawn, ${span}.`;
    const columns = `about ${numberText(perColumn, 3)} to a column`;
    return `${wholeText(frames)} frames, ${columns}, ${span}. The band reaches from the least to the greatest.`;
  }

  function fillQuantities() {
    const names = seriesQuantities(view);
    if (!names.includes(state.quantity)) names.push(state.quantity);
    const present = [...quantity.options].map(({ value }) => value);
    if (present.join() !== names.join())
      quantity.replaceChildren(...names.map((name) => element('option', { value: name }, labelOf(name))));
    quantity.value = state.quantity;
  }

  return {
    update(next, subject) {
      state = next;
      view = subject.view;
      fillQuantities();
      whole.disabled = use.disabled = state.zoom === null;
      const path = address(api.viewPath(view.id, 'series'), parametersOf(state, plot.columns()));
      question.put(path, (options) => api.answer(path, options), draw);
      if (latest?.path === path) plot.mark(markOf());
    },
    repaint() {
      plot.repaint();
    },
    refresh() {
      question.reset();
    },
    unmount() {
      question.stop();
      plot.destroy();
    },
  };
}
