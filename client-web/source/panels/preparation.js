// The form of the preparation: what is done to frames before every analysis. What the server refuses comes back to the
// field it is about.

import { fromTemplate, part, element } from '../dom.js';
import { sentence } from '../faces.js';
import { statedText } from '../numbers.js';
import { formatRemoval, parseRemoval, removalText } from '../removal.js';
import { lengthUnits, quantityText, unitMeaning } from '../units.js';
import { defaultPreparation, preparationNames } from '../view_state.js';

/** "80%" and "0.1" as a number and its unit. */
export function parseAperture(text) {
  if (text === null) return { number: '', unit: '%' };
  return text.endsWith('%') ? { number: text.slice(0, -1), unit: '%' } : { number: text, unit: 'm' };
}

function summaryOf(state) {
  const parts = [removalText(state.remove)];
  parts.push(
    state.aperture === null
      ? 'whole aperture'
      : `aperture ${state.aperture.endsWith('%') ? state.aperture.replace('%', ' %') : `${state.aperture} m`}`,
  );
  if (state.obscuration !== defaultPreparation.obscuration) parts.push(`obscuration ${state.obscuration}`);
  if (state.from !== null || state.to !== null) parts.push(`${state.from ?? 'start'} to ${state.to ?? 'end'} s`);
  if (state.first !== null || state.last !== null) parts.push(`frames ${state.first ?? 0} to ${state.last ?? 'end'}`);
  return parts.join(', ');
}

export function mount(root, { go }) {
  const details = fromTemplate('preparation');
  root.append(details);
  const form = part(details, 'form', 'panel preparation');
  const summary = part(details, '.preparation-summary', 'panel preparation');
  const units = part(form, '.units', 'panel preparation'),
    meaning = part(form, '.unit-meaning', 'panel preparation');
  const hint = part(form, '.cost-hint', 'panel preparation'),
    record = part(form, '.record', 'panel preparation');
  const apply = part(form, '.apply', 'panel preparation'),
    reset = part(form, '.reset', 'panel preparation');
  const field = (name) => form.elements.namedItem(name);
  const isWide = matchMedia('(min-width: 62rem)');
  const openIfWide = () => (details.open = isWide.matches || details.open);
  openIfWide();
  isWide.addEventListener('change', openIfWide);

  let state = null;
  let applied = -Infinity; // when the form was last sent, so that only then a refusal takes the focus

  /** Preparation as the form has it now. */
  function wanted() {
    const text = (name) => field(name).value.trim() || null;
    const aperture = text('aperture');
    const [x, y] = [text('center_x') ?? '0', text('center_y') ?? '0'];
    return {
      from: text('from'),
      to: text('to'),
      first: text('from') || text('to') ? null : state.first,
      last: text('from') || text('to') ? null : state.last,
      aperture: aperture === null ? null : field('aperture_unit').value === '%' ? `${aperture}%` : aperture,
      obscuration: text('obscuration') ?? defaultPreparation.obscuration,
      center: `${x},${y}`,
      remove: formatRemoval({
        piston: field('remove_piston').checked,
        tilt: field('remove_tilt').checked,
        mean: field('remove_mean').checked,
        focus: field('remove_focus').checked,
        modes: Number(field('remove_modes').value) || null,
      }),
      mean_over: field('mean_over').value,
      length_unit: form.querySelector('[name=length_unit]:checked')?.value ?? state.length_unit,
    };
  }

  const isDifferent = (preparation) => preparationNames.some((name) => preparation[name] !== state[name]);

  function showDifference() {
    const now = wanted();
    apply.disabled = !isDifferent(now);
    hint.hidden =
      now.aperture === null &&
      now.obscuration === defaultPreparation.obscuration &&
      now.center === defaultPreparation.center;
  }

  function fill() {
    const aperture = parseAperture(state.aperture);
    const [x, y] = state.center.split(',');
    const removal = parseRemoval(state.remove) ?? {
      piston: false,
      tilt: false,
      mean: false,
      focus: false,
      modes: null,
    };
    const texts = {
      from: state.from ?? '',
      to: state.to ?? '',
      aperture: aperture.number,
      aperture_unit: aperture.unit,
      obscuration: state.obscuration === '0' ? '' : state.obscuration,
      center_x: x === '0' ? '' : x,
      center_y: y === '0' ? '' : (y ?? ''),
      remove_modes: removal.modes ?? '',
      mean_over: state.mean_over,
    };
    for (const [name, text] of Object.entries(texts)) field(name).value = text;
    for (const name of ['piston', 'tilt', 'mean', 'focus']) field(`remove_${name}`).checked = removal[name];
    fillUnits();
    reset.disabled = preparationNames.every((name) => state[name] === defaultPreparation[name]);
    summary.textContent = summaryOf(state);
    showDifference();
  }

  function fillUnits() {
    const known = lengthUnits.some(({ name }) => name === state.length_unit);
    const choices = known ? lengthUnits : [...lengthUnits, { name: state.length_unit, label: state.length_unit }];
    units.replaceChildren(
      ...choices.map(({ name, label }) =>
        element(
          'label',
          {},
          element('input', { type: 'radio', name: 'length_unit', value: name, checked: name === state.length_unit }),
          element('span', {}, label),
        ),
      ),
    );
  }

  function clearRefusal() {
    for (const note of form.querySelectorAll('.field-error')) note.remove();
    for (const input of form.querySelectorAll('[aria-invalid]')) {
      input.removeAttribute('aria-invalid');
      input.removeAttribute('aria-describedby');
    }
  }

  function send(preparation) {
    if (!isDifferent(preparation)) return;
    clearRefusal();
    applied = performance.now();
    go(preparation);
  }

  form.addEventListener('submit', (event) => {
    event.preventDefault();
    send(wanted());
  });
  form.addEventListener('input', showDifference);
  units.addEventListener('change', () => send(wanted())); // a unit changes no frame, so it needs no second thought
  reset.addEventListener('click', () => {
    clearRefusal();
    go({ ...defaultPreparation });
  });

  /** Fields of a parameter, the one to be looked at first. */
  const fieldsOf = { center: 'center_x', remove: 'remove_modes', first: 'from', last: 'to' };

  return {
    update(next, { view, run }) {
      const isSame = state && preparationNames.every((name) => next[name] === state[name]);
      state = next;
      const conditions = view?.conditions ?? run?.conditions ?? null;
      meaning.textContent = unitMeaning(state.length_unit, conditions);
      record.textContent =
        view && view.duration_s !== undefined
          ? `The record runs from ${statedText(view.start_s ?? 0)} to ${quantityText(statedText((view.start_s ?? 0) + view.duration_s), 's')}.`
          : '';
      field('aperture').placeholder = 'whole';
      if (!isSame) {
        clearRefusal();
        fill();
      }
    },
    /** Shows what the server refused at the field it is about. @param {import('../api.js').ApiError} error */
    refuse(error) {
      if (!preparationNames.includes(error.parameter) || form.querySelector('.field-error')) return;
      const name = fieldsOf[error.parameter] ?? error.parameter;
      const input = form.querySelector(`[name="${name}"]`);
      const accepted = error.accepted.length ? ` Accepted: ${error.accepted.join(', ')}.` : '';
      const note = element('p', { class: 'field-error', id: 'preparation-error' }, sentence(error.message) + accepted);
      input.closest('.field').append(note);
      input.setAttribute('aria-invalid', 'true');
      input.setAttribute('aria-describedby', note.id);
      details.open = true;
      input.closest('details')?.setAttribute('open', '');
      if (performance.now() - applied < 5000) input.focus();
    },
    unmount() {
      isWide.removeEventListener('change', openIfWide);
    },
  };
}
