// A run's field of regard: one number per viewing angle, as a map and as a table.

import { address } from '../api.js';
import { element } from '../dom.js';
import { createFigure } from '../figure.js';
import { emptyFace, sentence } from '../faces.js';
import { limitControls } from '../limit_controls.js';
import { countText } from '../numbers.js';
import { fieldMap, fieldNodes } from '../plots/field_map.js';
import { paperPalette } from '../plots/palette.js';
import { fieldQuantities, labelOf } from '../quantities.js';
import { createQuestion } from '../question.js';
import { preparation } from '../view_state.js';
import { fieldModel, readingText } from './parts/field_model.js';

/** The model's extremes as a sentence. */
function findingOf(model, result) {
  const known = model.views.filter(({ value }) => value !== null);
  if (known.length === 0) return 'No view of this run has a value.';
  const least = known.reduce((a, b) => (b.value < a.value ? b : a)),
    greatest = known.reduce((a, b) => (b.value > a.value ? b : a));
  const text = ({ value, azimuth, elevation }) =>
    `${readingText(value, null, null, model.unit)} at ${azimuth}°, ${elevation}°`;
  const missing = result.arrays.value.data.length - known.length;
  const gaps = missing ? ` ${countText(missing, 'view')} without a value.` : '';
  return `Least ${text(least)}; greatest ${text(greatest)} (azimuth, elevation).${gaps}`;
}

function tableOf(result) {
  const { azimuth, elevation, value, low, high } = result.arrays;
  const ids = result.provenance.views.map((view) => view.id ?? view);
  return {
    columns: [
      { name: 'view', unit: '', values: ids },
      { name: 'azimuth', unit: 'deg', values: azimuth.data },
      { name: 'elevation', unit: 'deg', values: elevation.data },
      { name: 'value', unit: value.unit, values: value.data },
      ...(low
        ? [
            { name: 'low', unit: value.unit, values: low.data },
            { name: 'high', unit: value.unit, values: high.data },
          ]
        : []),
    ],
  };
}

export function mount(root, { api, go, place }) {
  const isSmall = place === 'rail';
  const figure = createFigure({ name: 'field-of-regard', title: 'Field of regard' });
  root.append(figure.root);
  const quantity = element(
    'select',
    { name: 'field', on: { change: () => go({ field: quantity.value, field_limits: null }) } },
    fieldQuantities.map((name) => element('option', { value: name }, labelOf(name))),
  );
  const limits = limitControls({ name: 'field_limits', go, isSymmetric: false });
  if (isSmall) figure.setTitle('Viewing angles');
  else figure.controls.append(element('label', {}, element('span', {}, 'Quantity'), quantity), limits.root);
  const map = fieldMap(figure.picture, {
    height: (width) => (isSmall ? Math.max(190, width * 0.68) : Math.min(500, Math.max(240, width * 0.5))),
    label: 'Field of regard. Arrow keys move between viewing angles, Enter opens one.',
    onCursor: (view) => figure.read(view?.text ?? null),
  });
  figure.setHint(isSmall ? 'Choose another angle.' : 'Choose a viewing angle to open it.');
  const question = createQuestion(api, figure);
  let latest = null;
  let state = null;
  let model = null;

  function draw({ answer, checks }) {
    latest = { answer, checks };
    model = fieldModel(answer.result, { state, checks });
    map.draw(model, state.view);
    limits.show(state.field_limits, [model.low, model.high]);
    const known = model.views.filter(({ value }) => value !== null);
    const [reason] = answer.result.warnings;
    if (model.views.length > 0 && known.length === 0) {
      figure.showFace(
        emptyFace('No viewing angle has a value', reason ? sentence(reason.text) : 'The frames have none either.'),
      );
    }
    if (model.views.length === 0)
      figure.showFace(
        emptyFace(
          'No viewing angles',
          'The views of this run state no azimuth and elevation. ',
          'They can be opened by their address, and are listed at /v1/views.',
        ),
      );
    figure.setFinding(isSmall ? '' : findingOf(model, answer.result));
    figure.setWarnings(isSmall ? [] : answer.result.warnings);
    figure.setOffer({
      answer,
      what: state.field,
      arrays: Object.keys(answer.result.arrays),
      table: () => tableOf(answer.result),
      drawing: () => ({
        width: 860,
        height: 460,
        nodes: fieldNodes(model, { width: 860, height: 460, palette: paperPalette }),
        title: `${labelOf(state.field)} over the field of regard of ${answer.result.subject}`,
        palette: paperPalette,
      }),
    });
  }

  return {
    update(next, { run }) {
      state = next;
      if (!fieldQuantities.includes(state.field))
        quantity.append(element('option', { value: state.field }, labelOf(state.field)));
      quantity.value = state.field;
      // A map over many records has no use for one record's window in seconds; it stays, as the server can judge it.
      const path = address(api.runPath(run.id, 'field-of-regard'), { quantity: state.field, ...preparation(state) });
      const ask = async (options) => {
        const [answer, views] = await Promise.all([api.answer(path, options), api.views(run.id, options)]);
        return { answer, checks: new Map(views.map((view) => [view.id, view.checks ?? []])) };
      };
      question.put(path, ask, draw);
      if (latest?.answer.path === path) draw(latest);
    },
    refresh() {
      question.reset();
    },
    unmount() {
      question.stop();
      map.destroy();
    },
  };
}
