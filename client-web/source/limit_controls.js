// Limits of a colour scale: automatic, or locked so that two plots compare.

import { element } from './dom.js';

/**
 * @param {{name: string, go: Function, isSymmetric: boolean}} options  name: of the state's field that holds them
 * @returns {{root: HTMLElement, show: (locked: *, shown: [number, number]) => void}}
 */
export function limitControls({ name, go, isSymmetric }) {
  const low = element('input', { type: 'number', step: 'any', 'aria-label': 'Lower limit of the colours' });
  const high = element('input', {
    type: 'number',
    step: 'any',
    'aria-label': isSymmetric ? 'Limit of the colours, both ways from zero' : 'Upper limit of the colours',
  });
  const lock = element('input', { type: 'checkbox' });
  const note = element('span', { class: 'limit-note', role: 'status' });

  const wanted = () => {
    const [a, b] = [low.valueAsNumber, high.valueAsNumber];
    if (isSymmetric) return b > 0 ? b : undefined;
    return Number.isFinite(a) && b > a ? [a, b] : undefined;
  };
  function apply() {
    const limits = wanted();
    note.textContent = limits === undefined ? (isSymmetric ? 'a number above 0' : 'lower below upper') : '';
    if (limits !== undefined) go({ [name]: limits });
  }
  lock.addEventListener('change', () => (lock.checked ? apply() : go({ [name]: null })));
  for (const input of [low, high]) {
    input.addEventListener('change', () => {
      lock.checked = true;
      apply();
    });
  }
  const root = element(
    'span',
    { class: 'limits', role: 'group', 'aria-label': 'Limits of the colours' },
    element('span', { class: 'limits-label' }, isSymmetric ? 'Limit ±' : 'Limits'),
    isSymmetric ? null : low,
    isSymmetric ? null : element('span', { 'aria-hidden': 'true' }, 'to'),
    high,
    element('label', { class: 'check' }, lock, element('span', {}, 'lock')),
    note,
  );
  return {
    root,
    /** @param {*} locked  as in the state; null: automatic @param {[number, number]} shown  limits drawn with */
    show(locked, shown) {
      lock.checked = locked !== null;
      if (document.activeElement !== low) low.value = String(Number(shown[0].toPrecision(6)));
      if (document.activeElement !== high) high.value = String(Number(shown[1].toPrecision(6)));
    },
  };
}
