// What is indexed, how far indexing is, and which files were refused and why.

import { element } from '../dom.js';
import { bytesText, countText, numberText, wholeText } from '../numbers.js';
import { createQuestion } from '../question.js';

function counts(index) {
  const pairs = [
    ['Campaigns', index.campaigns],
    ['Runs', index.runs],
    ['Views', index.views],
    ['Frames', index.frames],
    ['Refused files', index.refusals],
    ['Missing files', index.missing],
  ];
  return element(
    'dl',
    { class: 'facts' },
    pairs
      .filter(([, value]) => value !== undefined)
      .map(([name, value]) => element('div', {}, element('dt', {}, name), element('dd', {}, wholeText(value)))),
    index.bytes !== undefined &&
      element(
        'div',
        {},
        element('dt', {}, 'In files'),
        element('dd', { title: `${index.bytes} bytes` }, bytesText(index.bytes)),
      ),
  );
}

function progressOf(index) {
  const { progress } = index;
  if (index.state === 'idle' || !progress)
    return element('p', {}, 'Indexing is idle: the index is up to date with the last walk through the archive.');
  const rate = progress.bytes_per_second ? `, ${bytesText(progress.bytes_per_second)}/s` : '';
  return element(
    'div',
    {},
    element(
      'p',
      {},
      `Indexing: ${wholeText(progress.files_done)} of ${countText(progress.files_total, 'file')}, `,
      `${bytesText(progress.bytes_done)} of ${bytesText(progress.bytes_total)}${rate}.`,
    ),
    element('progress', {
      max: 1,
      value: progress.bytes_total ? progress.bytes_done / progress.bytes_total : 0,
      'aria-label': 'Progress of indexing',
    }),
    progress.current && element('p', { class: 'note path' }, element('code', {}, progress.current)),
  );
}

function refusalRows(refusals) {
  return refusals.map(({ path, code, text }) =>
    element(
      'tr',
      {},
      element('td', { class: 'path' }, element('code', {}, path)),
      element('td', {}, text),
      element('td', {}, element('code', {}, code)),
    ),
  );
}

export function mount(root, { api }) {
  const faceHost = element('div', {}),
    state = element('div', {}),
    refused = element('section', { class: 'refusals' });
  root.append(
    element(
      'header',
      { class: 'opening' },
      element('h1', { tabindex: -1 }, 'Index'),
      element('p', { class: 'lead' }, 'What the service has read of the archive. The archive itself is never written.'),
    ),
    faceHost,
    state,
    refused,
  );
  const question = createQuestion(api, {
    showFace: (face) => faceHost.replaceChildren(...(face ? [face] : [])),
    setStale: (isStale) => root.classList.toggle('is-stale', isStale),
    setRefused: () => state.replaceChildren(),
    hasPicture: () => state.childElementCount > 0,
  });
  let body = null,
    more = null;

  async function showMore(path) {
    const page = await api.refusals(path, {});
    body.append(...refusalRows(page.items));
    more.hidden = !page.next;
    more.onclick = () => showMore(page.next);
  }

  function draw({ index, page }) {
    state.replaceChildren(
      progressOf(index),
      counts(index),
      index.problem
        ? element('p', { class: 'field-error', role: 'alert' }, `Indexing stopped: ${index.problem.detail}`)
        : '',
    );
    if (page.items.length === 0) {
      refused.replaceChildren(element('h2', {}, 'Refused files'), element('p', {}, 'No file was refused.'));
      return;
    }
    body = element('tbody', {}, refusalRows(page.items));
    more = element('button', { type: 'button', hidden: !page.next, on: {} }, 'Show more');
    more.onclick = () => showMore(page.next);
    refused.replaceChildren(
      element('h2', {}, 'Refused files'),
      element(
        'p',
        {},
        `${countText(index.refusals ?? page.items.length, 'file')} could not be indexed; the rest of the archive is served. `,
        'A mended file is read again at the next walk.',
      ),
      element(
        'div',
        { class: 'scroll', tabindex: 0, role: 'region', 'aria-label': 'Refused files' },
        element(
          'table',
          {},
          element(
            'thead',
            {},
            element(
              'tr',
              {},
              ['File', 'Reason', 'Code'].map((head) => element('th', { scope: 'col' }, head)),
            ),
          ),
          body,
        ),
      ),
      more,
    );
  }

  return {
    update() {
      const ask = async (options) => {
        const [index, page] = await Promise.all([api.index(options), api.refusals(null, options)]);
        return { index, page };
      };
      question.put('index', ask, draw);
    },
    refresh() {
      question.reset();
    },
    unmount() {
      question.stop();
    },
  };
}
