// What is being looked at: the run or view with its conditions, the way to the neighbours, and what its quality checks
// found.

import { element } from '../dom.js';
import { countText, numberText, statedText, wholeText } from '../numbers.js';
import { angleText, conditionUnit, labelOf } from '../quantities.js';
import { quantityText } from '../units.js';

const severities = { info: 'Note', note: 'Note', warning: 'Warning', error: 'Fault', fault: 'Fault' };

function definitions(pairs) {
  return element(
    'dl',
    { class: 'facts' },
    pairs
      .filter(([, value]) => value !== null && value !== undefined && value !== '')
      .map(([name, value]) => element('div', {}, element('dt', {}, name), element('dd', {}, value))),
  );
}

/** Conditions that have a number, with their units; those named in `without` are shown elsewhere. */
function conditionPairs(conditions, without) {
  return Object.entries(conditions ?? {})
    .filter(([name, value]) => typeof value === 'number' && !without.includes(name))
    .map(([name, value]) => [
      labelOf(name).replace(/ (m s|kg m3|m3 kg|k|m)$/, ''),
      quantityText(statedText(value, 4), conditionUnit(name)),
    ]);
}

function checkList(checks) {
  if (checks.length === 0) return element('p', { class: 'checks-none' }, 'Quality checks found nothing to mention.');
  return element(
    'ul',
    { class: 'checks' },
    checks.map((check) =>
      element(
        'li',
        { class: `check-${check.severity}` },
        element('strong', {}, severities[check.severity] ?? check.severity),
        ' ',
        check.text,
        ' ',
        element('code', {}, check.code),
      ),
    ),
  );
}

function viewHeading(view) {
  const rate =
    view.frame_rate_hz >= 1e4
      ? `${statedText(view.frame_rate_hz / 1000)}\u00a0kHz`
      : `${statedText(view.frame_rate_hz)}\u00a0Hz`;
  const checks = view.checks ?? [];
  const about = definitions([
    ['Frames', `${wholeText(view.frames)} of ${view.rows} × ${view.columns}`],
    ['Rate', rate],
    ['Duration', view.duration_s === undefined ? null : quantityText(statedText(view.duration_s), 's')],
    ['Aperture', view.aperture_diameter_m ? quantityText(statedText(view.aperture_diameter_m), 'm') : null],
    ['Points', view.points === undefined ? null : wholeText(view.points)],
    ...conditionPairs(view.conditions, ['azimuth_deg', 'elevation_deg', 'aperture_diameter_m']),
  ]);
  const details = element(
    'details',
    { class: 'more' },
    element('summary', {}, 'Conditions and file'),
    about,
    view.conditions?.note && element('p', { class: 'note' }, view.conditions.note),
    view.path && element('p', { class: 'note path' }, element('code', {}, view.path)),
  );
  return [
    element('p', { class: 'kicker' }, [view.source, view.run_name ?? view.run].filter(Boolean).join(' · ')),
    element('h1', { tabindex: -1 }, angleText(view).replace(/^a/, 'A')),
    element(
      'p',
      { class: 'lead' },
      `${wholeText(view.frames)} frames of ${view.rows} × ${view.columns} points at ${rate}`,
      view.duration_s === undefined ? '' : `, ${quantityText(statedText(view.duration_s), 's')}`,
      '.',
    ),
    checks.length ? checkList(checks) : null,
    details,
    checks.length ? null : checkList(checks),
  ];
}

function runHeading(run) {
  return [
    element('p', { class: 'kicker' }, [run.source, run.campaign].filter(Boolean).join(' · ')),
    element('h1', { tabindex: -1 }, run.name ?? run.id),
    element(
      'p',
      { class: 'lead' },
      `${countText(run.views, 'viewing angle')}. Each cell below is one of them; choose one to see its wavefronts.`,
    ),
    definitions(conditionPairs({ ...run.conditions, ...run }, ['views', 'frames', 'bytes'])),
  ];
}

export function mount(root) {
  const host = element('div', { class: 'subject' });
  root.append(host);
  let shown = null;
  return {
    update(state, { run, view }) {
      const key = view ?? run;
      if (key === shown) return;
      shown = key;
      host.replaceChildren(...(view ? viewHeading(view) : runHeading(run)).filter(Boolean));
    },
    unmount() {},
  };
}
