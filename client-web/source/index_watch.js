// Keeps an eye on the index: the line at the top right, and word to the page when the archive has changed.

import { countText, numberText } from './numbers.js';

const busySeconds = 2,
  idleSeconds = 20;

function textOf(index) {
  if (index.state !== 'idle' && index.progress) {
    const { bytes_done: done, bytes_total: total } = index.progress;
    return `Indexing${total ? ` ${numberText(Math.floor((100 * done) / total), 3)} %` : ''}`;
  }
  const refused = index.refusals ? `, ${countText(index.refusals, 'file')} refused` : '';
  return `${countText(index.views, 'view')}${refused}`;
}

/**
 * @param {HTMLElement} line
 * @param {import('./api.js').createApi} api
 * @param {() => void} onChange  when views came, went or changed
 */
export function watchIndex(line, api, onChange) {
  let seen = null;
  const look = async () => {
    let wait = idleSeconds;
    try {
      const index = await api.index();
      const mark = index.revision ?? `${index.views} ${index.refusals}`;
      const text = textOf(index);
      if (line.textContent !== text) line.textContent = text;
      line.classList.toggle('has-refusals', Boolean(index.refusals));
      line.classList.remove('is-lost');
      if (seen !== null && seen !== mark) onChange();
      seen = mark;
      if (index.state !== 'idle') wait = busySeconds;
    } catch {
      line.textContent = 'No connection';
      line.classList.add('is-lost');
      wait = 5;
    }
    setTimeout(look, document.hidden ? idleSeconds * 1000 : wait * 1000);
  };
  look();
}
