// The viewing angles with the greatest OPD_rms of the whole archive: where to look first.

import { element } from '../dom.js';
import { numberText } from '../numbers.js';
import { svg, toElement } from '../plots/svg_tree.js';
import { createQuestion } from '../question.js';
import { angleText } from '../quantities.js';
import { quantityText } from '../units.js';
import { emptyState, formatState, withRun, withView } from '../view_state.js';

const shownCount = 8;
const bar = { width: 160, height: 10 };

const barPicture = (share) =>
  toElement(
    svg(
      'svg',
      { width: bar.width, height: bar.height, viewBox: `0 0 ${bar.width} ${bar.height}`, 'aria-hidden': 'true' },
      svg('rect', { width: (bar.width * share).toFixed(1), height: bar.height, rx: 1.5, fill: 'var(--plot-fill)' }),
    ),
  );

function rowOf(view, greatest) {
  const href = `?${formatState(withView(withRun(emptyState, view.run), view.id))}`;
  const flaws = (view.checks ?? []).length;
  return element(
    'tr',
    {},
    element('th', { scope: 'row' }, element('a', { href }, angleText(view))),
    element('td', {}, view.run_name ?? view.run),
    element('td', {}, quantityText(numberText(view.opd_rms_mean_m * 1e6, 3), 'um')),
    element('td', { class: 'bar-cell' }, barPicture(view.opd_rms_mean_m / greatest)),
    element('td', {}, flaws ? `${flaws} to look at` : 'nothing found'),
  );
}

export function mount(root, { api }) {
  const host = element('div', { class: 'worst-views' });
  root.append(host);
  const question = createQuestion(api, {
    // The archive above shows what fails; here there is then simply nothing.
    showFace: () => {},
    setStale: () => {},
    setRefused: () => host.replaceChildren(),
    hasPicture: () => host.childElementCount > 0,
  });

  function draw(views) {
    const known = views.filter(({ opd_rms_mean_m: value }) => Number.isFinite(value));
    if (known.length === 0) return host.replaceChildren();
    const heads = ['Viewing angle', 'Run', 'OPD_rms, mean', 'Against the greatest', 'Checks'];
    host.replaceChildren(
      element('h2', {}, 'Where light is bent most'),
      element('p', { class: 'note' }, 'Piston, tilt and steady lensing removed, over the whole record and aperture.'),
      element(
        'div',
        { class: 'scroll', tabindex: 0, role: 'region', 'aria-label': 'Where light is bent most' },
        element(
          'table',
          {},
          element(
            'thead',
            {},
            element(
              'tr',
              {},
              heads.map((head) => element('th', { scope: 'col' }, head)),
            ),
          ),
          element(
            'tbody',
            {},
            known.map((view) => rowOf(view, known[0].opd_rms_mean_m)),
          ),
        ),
      ),
    );
  }

  return {
    update(state) {
      const campaign = state.campaign;
      question.put(`worst ${campaign ?? ''}`, (options) => api.worstViews(campaign, shownCount, options), draw);
    },
    refresh() {
      question.reset();
    },
    unmount() {
      question.stop();
    },
  };
}
