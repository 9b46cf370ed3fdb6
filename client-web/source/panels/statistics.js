// Statistics of a view: the steady lensing and the rms at each point as maps, how OPD_rms is distributed, whether its
// mean has settled, and all values with their intervals.

import { element } from '../dom.js';
import { mapTable } from '../export.js';
import { createFigure } from '../figure.js';
import { limitControls } from '../limit_controls.js';
import { intervalText, numberText, percentText, plainNumber, statedText, wholeText } from '../numbers.js';
import { diverging, sequential } from '../plots/colour_maps.js';
import { heatMap, mapNodes } from '../plots/heat_map.js';
import { histogram, histogramNodes } from '../plots/histogram.js';
import { linePlot } from '../plots/line_plot.js';
import { lineNodes } from '../plots/line_svg.js';
import { paperPalette } from '../plots/palette.js';
import { extent, paddedRange, symmetricLimits, tightLimits } from '../plots/scales.js';
import { labelOf } from '../quantities.js';
import { createQuestion } from '../question.js';
import { quantityText, unitText, withUnit } from '../units.js';
import { statisticsPath } from './parts/statistics_question.js';

/** A map of the aperture: one figure for the mean and one for the rms, which differ in what `kind` says. */
function apertureMap(kind, go) {
  const figure = createFigure({ name: kind.name, title: kind.title });
  const limits = limitControls({ name: kind.limitName, go, isSymmetric: kind.isSymmetric });
  figure.controls.append(limits.root);
  let model = null;
  const map = heatMap(figure.picture, {
    label: `${kind.title}. Arrow keys read points.`,
    onCursor: (point) => figure.read(point ? readingAt(point) : null),
  });
  figure.setHint('Point at the map to read it.');

  function readingAt({ row, column }) {
    const value = model.values[row * model.columns + column];
    const place = `x ${numberText(model.x[column], 3)}, y ${numberText(model.y[row], 3)} ${model.axisUnit}`;
    return `${place}: ${value === null ? 'outside the aperture' : quantityText(numberText(value, 4), model.unit)}`;
  }

  return {
    figure,
    draw(answer, state) {
      const { arrays, warnings } = answer.result;
      const array = arrays[kind.array];
      const [rows, columns] = array.shape;
      const locked = state[kind.limitName];
      const [low, high] = kind.isSymmetric
        ? locked
          ? [-locked, locked]
          : symmetricLimits(array.data)
        : (locked ?? tightLimits(array.data));
      model = {
        values: array.data,
        rows,
        columns,
        x: arrays.x.data,
        y: arrays.y.data,
        axisUnit: arrays.x.unit,
        unit: array.unit,
        map: kind.isSymmetric ? diverging : sequential,
        low,
        high,
        barTitle: unitText(array.unit) || kind.short,
      };
      map.draw(model);
      limits.show(locked, [low, high]);
      const range = extent(array.data);
      figure.setFinding(
        range
          ? kind.finding(
              range.map((value) => numberText(value, 3)),
              array.unit,
            )
          : 'No point has a value.',
      );
      figure.setWarnings(warnings.filter(({ code }) => kind.warnings.test(code)));
      figure.setOffer({
        answer,
        what: kind.array,
        arrays: [kind.array, 'x', 'y'],
        table: () =>
          mapTable({
            name: kind.array,
            unit: array.unit,
            axisUnit: arrays.x.unit,
            x: model.x,
            y: model.y,
            values: model.values,
          }),
        drawing: () => {
          const { nodes, height } = mapNodes(model, { width: 560, palette: paperPalette });
          return { width: 560, height, nodes, title: `${kind.title}, ${answer.result.subject}`, palette: paperPalette };
        },
      });
    },
    destroy: () => map.destroy(),
  };
}

const meanMap = {
  name: 'mean-map',
  title: 'Steady lensing',
  short: 'OPD',
  array: 'mean_map',
  limitName: 'mean_limit',
  isSymmetric: true,
  warnings: /mean/,
  finding: ([low, high], unit) => `Time mean at each point, ${low} to ${quantityText(high, unit)}.`,
};
const rmsMap = {
  name: 'rms-map',
  title: 'Fluctuation',
  short: 'rms',
  array: 'rms_map',
  limitName: 'rms_limits',
  isSymmetric: false,
  warnings: /rms_map|steady/,
  finding: ([low, high], unit) => `Rms over time at each point, ${low} to ${quantityText(high, unit)}.`,
};

function distribution() {
  const figure = createFigure({ name: 'histogram', title: 'How OPD_rms is distributed' });
  let latest = null;
  const plot = histogram(figure.picture, {
    height: 250,
    label: 'Histogram of OPD_rms. Arrow keys walk along its bins.',
    onCursor: (bin) => figure.read(bin === null ? null : readingAt(bin)),
  });

  figure.setHint('Point at a bar to read it.');

  function readingAt(bin) {
    const {
      histogram_low: low,
      histogram_high: high,
      histogram_count: count,
      lognormal_count: fit,
    } = latest.result.arrays;
    const edges = `${numberText(low.data[bin], 4)} to ${quantityText(numberText(high.data[bin], 4), low.unit)}`;
    return `${edges}: ${wholeText(count.data[bin])} frames${fit ? `, ${numberText(fit.data[bin], 3)} by the fit` : ''}`;
  }

  return {
    figure,
    draw(answer) {
      latest = answer;
      const { values, arrays, warnings } = answer.result;
      const { histogram_low: low, histogram_high: high, histogram_count: count, lognormal_count: fit } = arrays;
      if (!count) return figure.root.toggleAttribute('hidden', true);
      const model = {
        low: low.data,
        high: high.data,
        count: count.data,
        fit: fit?.data ?? null,
        xTitle: withUnit('OPD_rms', low.unit),
        yTitle: 'frames',
        marks: values.opd_rms_mean ? [{ x: values.opd_rms_mean.value, name: 'mean' }] : [],
      };
      plot.draw(model);
      const distance = values.lognormal_ks_distance?.value;
      figure.setFinding(
        fit && Number.isFinite(distance)
          ? `Bars are frames, the dashed line a log-normal fit: at most ${percentText(distance, 2)} apart (Kolmogorov–Smirnov).`
          : 'Bars are frames.',
      );
      figure.setWarnings(warnings.filter(({ code }) => /lognormal|histogram|distribution/.test(code)));
      const columns = {
        histogram_low: low,
        histogram_high: high,
        histogram_count: count,
        ...(fit ? { lognormal_count: fit } : {}),
      };
      figure.setOffer({
        answer,
        what: 'histogram',
        arrays: Object.keys(columns),
        table: () => ({
          columns: Object.entries(columns).map(([name, array]) => ({ name, unit: array.unit, values: array.data })),
        }),
        drawing: () => ({
          width: 720,
          height: 340,
          nodes: histogramNodes(model, { width: 720, height: 340, palette: paperPalette }),
          title: `Distribution of OPD_rms, ${answer.result.subject}`,
          palette: paperPalette,
        }),
      });
    },
    repaint() {},
    destroy: () => plot.destroy(),
  };
}

/** Range of the mean and of its interval once half of the record is in: the first few frames would dwarf the rest. */
function settledRange(mean, low, high) {
  const later = (values) => (values ?? []).slice(Math.floor(mean.length / 2));
  return paddedRange(extent([...mean, ...later(low), ...later(high)]) ?? [0, 1]);
}

function convergence() {
  const figure = createFigure({ name: 'convergence', title: 'Has the mean settled?' });
  let latest = null;
  const plot = linePlot(figure.picture, {
    height: 250,
    label: 'Mean of OPD_rms over the frames so far. Arrow keys read values.',
    onCursor: (index) => figure.read(index === null ? null : readingAt(index)),
  });

  figure.setHint('Point at the curve to read it.');

  function readingAt(index) {
    const {
      convergence_frames: frames,
      convergence_mean: mean,
      convergence_low: low,
      convergence_high: high,
    } = latest.result.arrays;
    const text = intervalText({ value: mean.data[index], low: low.data[index], high: high.data[index] });
    const interval = text.low === null ? '' : ` (${text.low} to ${text.high})`;
    return `after ${wholeText(frames.data[index])} frames: ${quantityText(text.value, mean.unit)}${interval}`;
  }

  return {
    figure,
    draw(answer) {
      latest = answer;
      const {
        convergence_frames: frames,
        convergence_mean: mean,
        convergence_low: low,
        convergence_high: high,
      } = answer.result.arrays;
      if (!frames || frames.data.length < 2) return figure.root.toggleAttribute('hidden', true);
      figure.root.hidden = false;
      const level = answer.result.values.opd_rms_mean?.level;
      const model = {
        x: { values: Float64Array.from(frames.data), title: 'Frames so far' },
        y: { title: withUnit('OPD_rms, mean', mean.unit), range: settledRange(mean.data, low?.data, high?.data) },
        curves: [{ name: 'mean', values: mean.data }],
        bands:
          low && high
            ? [{ name: level ? `${percentText(level)} interval` : 'interval', low: low.data, high: high.data }]
            : [],
      };
      plot.draw(model);
      const last = frames.data.length - 1;
      const change = Math.abs(mean.data[last] - mean.data[Math.floor(last / 2)]) / Math.abs(mean.data[last]);
      figure.setFinding(
        `The mean over the frames so far${level ? `, with its ${percentText(level)} interval` : ''}. ` +
          `It moved by ${percentText(change, 2)} over the second half.`,
      );
      figure.setWarnings(
        answer.result.warnings.filter(({ code }) => /converge|stationar|effective|interval/.test(code)),
      );
      const columns = {
        convergence_frames: frames,
        convergence_mean: mean,
        convergence_low: low,
        convergence_high: high,
      };
      figure.setOffer({
        answer,
        what: 'convergence',
        arrays: Object.keys(columns),
        table: () => ({
          columns: Object.entries(columns)
            .filter(([, array]) => array)
            .map(([name, array]) => ({ name, unit: array.unit, values: array.data })),
        }),
        drawing: () => ({
          width: 720,
          height: 340,
          nodes: lineNodes(model, { width: 720, height: 340, palette: paperPalette }),
          title: `Convergence of the mean of OPD_rms, ${answer.result.subject}`,
          palette: paperPalette,
        }),
      });
    },
    repaint: () => plot.repaint(),
    destroy: () => plot.destroy(),
  };
}

function valueRow(label, value) {
  const text = intervalText(value);
  const isWhole = Number.isInteger(value.value);
  const interval =
    text.low !== null && value.low !== null && value.low !== undefined
      ? `${text.low} to ${text.high}${value.level ? ` (${percentText(value.level)})` : ''}`
      : '';
  return element(
    'tr',
    {},
    element('th', { scope: 'row' }, label),
    element('td', { title: plainNumber(value.value) }, isWhole ? wholeText(value.value) : text.value),
    element('td', {}, unitText(value.unit)),
    element('td', {}, interval),
  );
}

/** All values, and the percentiles, as one table. */
function allValues() {
  const figure = createFigure({ name: 'values', title: 'All values' });
  return {
    figure,
    draw(answer) {
      const { values, arrays, warnings } = answer.result;
      const rows = Object.entries(values).map(([name, value]) => valueRow(labelOf(name), value));
      const { percent, percentiles, percentiles_low: lows, percentiles_high: highs } = arrays;
      const shares = (percent?.data ?? []).map((share, i) =>
        valueRow(`${statedText(share)}\u00a0% of frames below`, {
          value: percentiles.data[i],
          low: lows?.data[i],
          high: highs?.data[i],
          unit: percentiles.unit,
        }),
      );
      figure.picture.replaceChildren(
        element(
          'div',
          { class: 'value-tables' },
          valueTable('Values with their intervals', ['Value', 'Number', 'Unit', 'Interval'], rows),
          shares.length
            ? valueTable('Percentiles of OPD_rms', ['OPD_rms', 'Number', 'Unit', 'Interval'], shares)
            : null,
        ),
      );
      figure.setWarnings(warnings);
      figure.setOffer({
        answer,
        what: 'values',
        arrays: percentiles ? ['percent', 'percentiles'] : [],
        table: () => valuesTable(values),
        drawing: null,
      });
    },
    repaint() {},
    destroy() {},
  };
}

const valueTable = (caption, heads, rows) =>
  element(
    'div',
    { class: 'scroll', tabindex: 0, role: 'region', 'aria-label': caption },
    element(
      'table',
      { class: 'values' },
      element('caption', { class: 'unseen' }, caption),
      element(
        'thead',
        {},
        element(
          'tr',
          {},
          heads.map((head) => element('th', { scope: 'col' }, head)),
        ),
      ),
      element('tbody', {}, rows),
    ),
  );

function valuesTable(values) {
  const entries = Object.entries(values);
  const column = (name, take) => ({ name, unit: '', values: entries.map(([, value]) => take(value) ?? null) });
  return {
    columns: [
      { name: 'name', unit: '', values: entries.map(([name]) => name) },
      column('value', ({ value }) => value),
      { name: 'unit', unit: '', values: entries.map(([, { unit }]) => unit) },
      column('low', ({ low }) => low),
      column('high', ({ high }) => high),
      column('level', ({ level }) => level),
    ],
  };
}

export function mount(root, { api, go }) {
  const parts = [apertureMap(meanMap, go), apertureMap(rmsMap, go), distribution(), convergence(), allValues()];
  const faceHost = element('div', { class: 'wide face-row' });
  root.append(faceHost, ...parts.map(({ figure }) => figure.root));
  const each = (act) => parts.forEach(({ figure }) => act(figure));
  const question = createQuestion(api, {
    showFace(face) {
      faceHost.replaceChildren(...(face ? [element('h2', {}, 'Statistics'), face] : []));
      if (!face) each((figure) => figure.showFace(null));
    },
    setStale: (isStale) => each((figure) => figure.setStale(isStale)),
    setRefused: () => each((figure) => figure.setRefused()),
    hasPicture: () => parts[0].figure.hasPicture(),
  });
  let latest = null,
    state = null;
  const draw = () => parts.forEach((piece) => piece.draw(latest, state));

  return {
    update(next, { view }) {
      const before = state;
      state = next;
      const path = statisticsPath(api, state, view);
      question.put(
        path,
        (options) => api.answer(path, options),
        (answer) => {
          latest = answer;
          draw();
        },
      );
      const haveLimitsMoved = before && ['mean_limit', 'rms_limits'].some((name) => before[name] !== state[name]);
      if (haveLimitsMoved && latest?.path === path) draw();
    },
    repaint() {
      parts.forEach((piece) => piece.repaint?.());
    },
    refresh() {
      question.reset();
    },
    unmount() {
      question.stop();
      parts.forEach((piece) => piece.destroy());
    },
  };
}
