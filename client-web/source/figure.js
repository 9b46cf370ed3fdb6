// The frame that every plot hangs in: title and finding, the picture, what its cursor reads, warnings, numbers as a
// table, and ways to take it away. A panel fills it and says what can be saved.

import { address } from './api.js';
import { openCall } from './call_dialog.js';
import { element, fromTemplate, part } from './dom.js';
import { csvText, fileStem, pngBlob, saveFile, svgDocument } from './export.js';
import { warningItems } from './faces.js';
import { numberText, plainNumber } from './numbers.js';
import { withUnit } from './units.js';

const mostCells = 1500; // of a table on the page; the files hold everything

/**
 * @typedef {{
 *   answer: import('./api.js').Answer,
 *   what: string,
 *   arrays: string[],
 *   table: () => import('./export.js').Table,
 *   drawing: () => import('./export.js').Drawing
 * }} Offer  what a figure can give; `what` ends the files' names, `arrays` are those of the answer that it shows
 */

/**
 * @param {{name: string, title: string}} options  name: for styles and tests
 */
export function createFigure({ name, title }) {
  const root = fromTemplate('figure');
  const find = (selector) => part(root, selector, `figure ${name}`);
  root.dataset.name = name;
  find('.plot-title').textContent = title;
  const picture = find('.picture'),
    readout = find('.readout'),
    faceHost = find('.face-host'),
    tools = find('.tools');
  const numbers = find('.numbers'),
    numbersButton = find('.numbers-button'),
    save = find('.save');
  numbers.setAttribute('aria-label', `Numbers: ${title}`);
  /** @type {?Offer} */
  let offer = null;
  let readoutTimer = null;
  let resting = '';

  const lines = () => {
    const { result, path, digest } = offer.answer;
    return [
      `Bentlight · ${result.analysis} of ${result.subject}`,
      new URL(path, location.href).href,
      digest ? `digest ${digest}` : 'no digest',
      ...(result.warnings ?? []).map((warning) => `warning ${warning.code}: ${warning.text}`),
    ];
  };
  const stem = () =>
    fileStem(offer.answer.result.subject, offer.answer.result.analysis, offer.answer.digest, offer.what);
  const csv = () => csvText(offer.table(), lines());

  const actions = {
    copy: () =>
      navigator.clipboard.writeText(csv()).then(
        () => say('Copied as CSV.'),
        () => say('The browser did not allow copying.'),
      ),
    csv: () => saveFile(`${stem()}.csv`, new Blob([csv()], { type: 'text/csv' })),
    svg: () =>
      saveFile(`${stem()}.svg`, new Blob([svgDocument(offer.drawing(), lines()).text], { type: 'image/svg+xml' })),
    png: async () => saveFile(`${stem()}.png`, await pngBlob(svgDocument(offer.drawing(), lines()), lines())),
  };
  for (const button of root.querySelectorAll('[data-save]')) {
    button.addEventListener('click', () => {
      save.open = false;
      part(save, 'summary', 'figure').focus();
      actions[button.dataset.save]();
    });
  }
  part(save, '.links', 'figure').addEventListener('click', () => (save.open = false));
  find('.call').addEventListener('click', () => openCall(offer, title));
  numbersButton.addEventListener('click', () => {
    numbers.hidden = !numbers.hidden;
    numbersButton.setAttribute('aria-expanded', String(!numbers.hidden));
    if (!numbers.hidden) fillNumbers();
  });

  function fillNumbers() {
    if (offer) numbers.replaceChildren(tableElement(offer.table(), title));
  }

  /** Links to the whole answer in bulk formats, made by the server. */
  function fillLinks() {
    const { path } = offer.answer;
    const [base, query = ''] = path.split('?');
    const parameters = Object.fromEntries(new URLSearchParams(query));
    const links = [
      ['Whole result as HDF5', { format: 'hdf5' }],
      ...offer.arrays.map((array) => [`${array} as NPY`, { format: 'npy', array }]),
    ];
    part(save, '.links', 'figure').replaceChildren(
      ...links.map(([text, extra]) =>
        element('a', { href: address(base, { ...parameters, ...extra }), download: '' }, text),
      ),
    );
  }

  function say(text) {
    resting = text;
    readout.textContent = text;
  }

  return {
    root,
    picture,
    /** Where a panel puts its own controls, above the picture. */
    controls: find('.controls'),
    /** Where a panel puts controls that belong beneath the picture. */
    transport: find('.transport'),

    /** What the plot shows, in one sentence. */
    setFinding(text) {
      find('.finding').textContent = text;
    },
    setTitle(text) {
      find('.plot-title').textContent = text;
    },
    /** What the cursor reads; spoken once it rests. null: no cursor. */
    read(text) {
      clearTimeout(readoutTimer);
      readoutTimer = setTimeout(() => (readout.textContent = text ?? resting), 60);
    },
    /** What stands where the cursor's reading goes while there is none. */
    setHint(text) {
      resting = text;
      if (!readout.textContent) readout.textContent = text;
    },
    setWarnings(warnings) {
      const list = find('.warnings');
      list.hidden = warnings.length === 0;
      list.replaceChildren(...warningItems(warnings));
    },
    /** @param {Offer} next */
    setOffer(next) {
      offer = next;
      tools.hidden = false;
      fillLinks();
      if (!numbers.hidden) fillNumbers();
      for (const button of save.querySelectorAll('[data-save=png], [data-save=svg]')) button.hidden = !offer.drawing;
      find('.print-source').textContent = lines().slice(0, 3).join('\n');
    },

    showFace(face) {
      faceHost.replaceChildren(...(face ? [face] : []));
      if (!face) root.classList.remove('is-refused');
    },
    setStale(isStale) {
      root.classList.toggle('is-stale', isStale && offer !== null);
    },
    setRefused() {
      root.classList.remove('is-stale');
      root.classList.add('is-refused');
    },
    hasPicture: () => offer !== null && !root.classList.contains('is-refused'),
  };
}

/** A table for reading: numbers right-aligned, units in the head. */
function tableElement({ columns }, title) {
  const rows = Math.max(0, ...columns.map(({ values }) => values.length));
  const shown = Math.min(rows, Math.floor(mostCells / columns.length));
  const cell = (value) =>
    typeof value === 'string' ? value : value === null || !Number.isFinite(value) ? 'no value' : numberText(value, 5);
  const body = element('tbody');
  for (let row = 0; row < shown; ++row) {
    body.append(
      element(
        'tr',
        {},
        columns.map(({ values }) =>
          element(
            'td',
            { title: typeof values[row] === 'number' ? plainNumber(values[row]) : null },
            cell(values[row]),
          ),
        ),
      ),
    );
  }
  const note =
    shown < rows
      ? element('p', { class: 'note' }, `The first ${shown} of ${rows} rows; the CSV holds all of them.`)
      : null;
  return element(
    'div',
    {},
    element(
      'table',
      {},
      element('caption', { class: 'unseen' }, `Numbers of: ${title}`),
      element(
        'thead',
        {},
        element(
          'tr',
          {},
          columns.map((column) => element('th', { scope: 'col' }, withUnit(column.name, column.unit))),
        ),
      ),
      body,
    ),
    note,
  );
}
