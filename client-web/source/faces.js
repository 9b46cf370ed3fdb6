// What stands where a plot would be when there is none: nothing here, not possible, connection lost, work going on.
// Three faces of failure are kept apart, since a person does something else about each.

import { element } from './dom.js';
import { bytesText, waitText, wholeText } from './numbers.js';

/** Nothing here: why, and what to do about it. */
export function emptyFace(title, ...advice) {
  return element(
    'div',
    { class: 'face face-empty' },
    element('p', { class: 'face-title' }, title),
    element('p', {}, advice),
  );
}

/**
 * Not possible: what the server said, about which parameter, and what it would accept.
 *
 * @param {import('./api.js').ApiError} error
 */
export function refusalFace(error) {
  const isCancelled = error.code === 'cancelled';
  return element(
    'div',
    { class: 'face face-refusal', role: 'alert', tabindex: -1 },
    element('p', { class: 'face-title' }, isCancelled ? 'Cancelled' : 'Not possible'),
    element('p', {}, sentence(error.message)),
    error.parameter && element('p', {}, 'Parameter: ', element('code', {}, error.parameter)),
    error.accepted.length > 0 &&
      element(
        'p',
        {},
        'Accepted: ',
        error.accepted.flatMap((each, i) => [i > 0 && ', ', element('code', {}, each)]),
      ),
    element(
      'p',
      { class: 'face-code' },
      'Code ',
      element('code', {}, error.code),
      error.status ? ` · status ${error.status}` : '',
    ),
  );
}

/** With a capital and a full stop. What begins with a name, such as aperture=900%, keeps its spelling. */
export function sentence(text) {
  const capital = /^[a-z]+[ ,]/.test(text) ? text.charAt(0).toUpperCase() + text.slice(1) : text;
  return /[.!?]$/.test(capital) ? capital : `${capital}.`;
}

/** Connection lost: the old picture stays, greyed; when it is tried again. */
export function lostFace(error, { seconds, hasOld, retry }) {
  return element(
    'div',
    { class: 'face face-lost', role: 'status' },
    element('p', { class: 'face-title' }, error.retryAfter ? 'The server is busy' : 'Connection lost'),
    element(
      'p',
      {},
      `${sentence(error.message)} `,
      hasOld ? 'What stands below is the last answer. ' : '',
      `Trying again every ${seconds} s.`,
    ),
    element('button', { type: 'button', on: { click: retry } }, 'Try now'),
  );
}

/** Work going on, without knowing how much. */
export function workingFace() {
  return element(
    'div',
    { class: 'face face-working', role: 'status' },
    element('p', {}, 'Asking the server …'),
    element('progress', { 'aria-label': 'Asking the server' }),
  );
}

function progressText(job) {
  const { done = job.bytes_read, total = job.bytes_total, seconds_left: left } = job;
  const isOfViews = job.analysis === 'field-of-regard'; // it counts views, everything else bytes
  const parts = [];
  if (job.state === 'queued') parts.push('Waiting for its turn');
  else if (!(total > 0)) parts.push('Reading frames');
  else if (isOfViews) parts.push(`Viewing angle ${wholeText(done)} of ${wholeText(total)}`);
  else parts.push(`Reading frames: ${bytesText(done)} of ${bytesText(total)}`);
  if (left !== null && left !== undefined) parts.push(`about ${waitText(left)} left`);
  return parts.join(', ');
}

/** Long work with its progress and a cancel that stops it on the server. `tell` keeps it up to date. */
export function jobFace(cancel) {
  const text = element('p', {}, 'Reading frames');
  const bar = element('progress', { max: 1, value: 0, 'aria-label': 'Progress of reading frames' });
  const button = element(
    'button',
    { type: 'button', on: { click: () => ((button.disabled = true), cancel()) } },
    'Cancel',
  );
  const face = element('div', { class: 'face face-job' }, element('div', { role: 'status' }, text), bar, button);
  return {
    face,
    tell(job) {
      text.textContent = progressText(job);
      bar.value = job.fraction ?? job.progress ?? 0;
    },
  };
}

const shownAlike = 3;

/**
 * Warnings of a result, at its plot; of many with the same code the first few.
 *
 * @param {{code: string, text: string}[]} warnings
 */
export function warningItems(warnings) {
  const seen = new Map();
  const items = [];
  for (const { code, text } of warnings) {
    seen.set(code, (seen.get(code) ?? 0) + 1);
    if (seen.get(code) <= shownAlike) items.push(warningItem(sentence(text), code));
  }
  for (const [code, count] of seen) {
    if (count > shownAlike) items.push(warningItem(`And ${count - shownAlike} more like these.`, code));
  }
  return items;
}

const warningItem = (text, code) =>
  element(
    'li',
    {},
    element('span', { class: 'warning-mark', 'aria-hidden': 'true' }),
    text,
    ' ',
    element('code', {}, code),
  );
