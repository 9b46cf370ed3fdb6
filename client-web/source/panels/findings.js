// The numbers that matter most, large, with how sure they are.

import { element } from '../dom.js';
import { intervalText, percentText, wholeText } from '../numbers.js';
import { createQuestion } from '../question.js';
import { unitMeaning, unitText } from '../units.js';
import { removalText } from '../removal.js';
import { statisticsPath } from './parts/statistics_question.js';

const shownValues = [
  { name: 'opd_rms_mean', title: 'OPD_rms, mean' },
  { name: 'opd_rms_overall', title: 'Overall' },
  { name: 'opd_rms_std', title: 'Standard deviation' },
  { name: 'effective_samples', title: 'Effective samples' },
  { name: 'skewness', title: 'Skewness' },
];

function valueItem({ title }, value, isFirst) {
  const isCount = Number.isInteger(value.value);
  const text = isCount ? { value: wholeText(value.value), low: null } : intervalText(value);
  const level = value.level ? `${percentText(value.level)} interval` : 'interval';
  const hasInterval = text.low !== null && value.low !== null && value.low !== undefined;
  return element(
    'div',
    { class: isFirst ? 'finding-item is-first' : 'finding-item' },
    element('dt', {}, title),
    element(
      'dd',
      {},
      element('span', { class: 'number' }, text.value),
      unitText(value.unit) && element('span', { class: 'unit' }, `\u00a0${unitText(value.unit)}`),
    ),
    hasInterval &&
      element('dd', { class: 'interval' }, `${text.low} to ${text.high}`, element('span', {}, ` · ${level}`)),
  );
}

export function mount(root, { api }) {
  const faceHost = element('div', {});
  const list = element('dl', { class: 'findings' });
  const note = element('p', { class: 'note' });
  root.append(element('h2', { class: 'unseen' }, 'Findings'), faceHost, list, note);
  const question = createQuestion(api, {
    // The statistics below show the same question's progress and failures; one place is enough for them.
    showFace: () => {},
    setStale: (isStale) => list.classList.toggle('is-stale', isStale),
    setRefused: () => list.replaceChildren(),
    hasPicture: () => list.childElementCount > 0,
  });

  return {
    update(state, { view }) {
      const path = statisticsPath(api, state, view);
      question.put(
        path,
        (options) => api.answer(path, options),
        ({ result }) => {
          const known = shownValues.filter(({ name }) => Number.isFinite(result.values[name]?.value));
          list.replaceChildren(...known.map((entry, i) => valueItem(entry, result.values[entry.name], i === 0)));
          const frames = result.provenance.frames?.count;
          const meaning = unitMeaning(state.length_unit, view.conditions);
          note.textContent = [
            removalText(state.remove).replace(/^./, (letter) => letter.toUpperCase()),
            frames ? `${wholeText(frames)} frames` : null,
            meaning,
          ]
            .filter(Boolean)
            .join(' · ');
        },
      );
    },
    refresh() {
      question.reset();
    },
    unmount() {
      question.stop();
    },
  };
}
