// The dialog with the call that made a plot: curl, Python, Octave, and the permalink for papers.

import { element, part } from './dom.js';
import { callTexts } from './export.js';

async function copy(text, status) {
  try {
    await navigator.clipboard.writeText(text);
    status.textContent = 'Copied.';
  } catch {
    status.textContent = 'The browser did not allow copying; select the text instead.';
  }
}

function block(name, text, status) {
  return element(
    'section',
    { class: 'call-block' },
    element(
      'div',
      { class: 'call-head' },
      element('h3', {}, name),
      element(
        'button',
        { type: 'button', 'aria-label': `Copy ${name}`, on: { click: () => copy(text, status) } },
        'Copy',
      ),
    ),
    element('pre', { tabindex: 0, 'aria-label': name }, element('code', {}, text)),
  );
}

/** @param {import('./figure.js').Offer} offer @param {string} title  of the figure */
export function openCall(offer, title) {
  const dialog = part(document, '#call-dialog', 'call dialog');
  const { result, path, digest } = offer.answer;
  const arrays = offer.arrays.map((name) => ({ name, dimensions: result.arrays[name]?.shape.length ?? 1 }));
  const status = element('p', { role: 'status', class: 'note' });
  const blocks = callTexts({ url: new URL(path, location.href).href, arrays }).map(({ name, text }) =>
    block(name, text, status),
  );
  if (digest) blocks.push(block('Permalink', new URL(`/v1/results/${digest}`, location.href).href, status));
  part(dialog, '.call-subject', 'call dialog').textContent = title;
  part(dialog, '.call-blocks', 'call dialog').replaceChildren(...blocks, status);
  dialog.showModal();
}
