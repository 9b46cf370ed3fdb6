// Where one begins: campaigns and their runs, each run with a small picture of its field of regard.

import { begin } from '../busy.js';
import { element } from '../dom.js';
import { emptyFace } from '../faces.js';
import { countText, numberText, statedText } from '../numbers.js';
import { fieldThumbnail } from '../plots/field_map.js';
import { extent, tightLimits } from '../plots/scales.js';
import { createQuestion } from '../question.js';
import { quantityText } from '../units.js';
import { changed, emptyState, formatState, withRun } from '../view_state.js';
import { fieldModel, readingText } from './parts/field_model.js';
import { raysPicture } from './parts/rays.js';

const mostPictures = 24; // each is a question over all views of a run

const range = (ends, unit) => {
  if (!ends || ends.low === null || ends.low === undefined) return null;
  const text = (value) => `${statedText(value, 4)}`;
  return ends.low === ends.high ? `${text(ends.low)}${unit}` : `${text(ends.low)}${unit} to ${text(ends.high)}${unit}`;
};

function facts(run) {
  const list = [
    ['Viewing angles', String(run.views)],
    ['Azimuth', range(run.azimuth_deg, '°')],
    ['Elevation', range(run.elevation_deg, '°')],
    [
      'Mach',
      run.mach === null || run.mach === undefined
        ? null
        : typeof run.mach === 'object'
          ? range(run.mach, '')
          : statedText(run.mach),
    ],
  ];
  return element(
    'dl',
    { class: 'facts' },
    list
      .filter(([, value]) => value)
      .map(([name, value]) => element('div', {}, element('dt', {}, name), element('dd', {}, value))),
  );
}

function runCard(run, state) {
  const href = `?${formatState(withRun(changed(state, { campaign: run.campaign }), run.id))}`;
  return element(
    'li',
    { class: 'run-card' },
    element('div', { class: 'run-picture', data: { run: run.id } }),
    element(
      'div',
      { class: 'run-text' },
      element('h3', {}, element('a', { href, 'data-link': true }, run.name ?? run.id)),
      run.source && element('p', { class: 'source' }, run.source),
      facts(run),
      element('p', { class: 'run-range', data: { range: run.id } }),
    ),
  );
}

/** @returns {{update: (state: import('../view_state.js').ViewState) => void, unmount: () => void}} */
export function mount(root, { api }) {
  const faceHost = element('div', {});
  const lead = element('p', { class: 'lead' }, 'Reading what is indexed …');
  const list = element('div', { class: 'campaigns' });
  const legend = element('p', { class: 'note archive-legend' });
  root.append(
    element(
      'header',
      { class: 'opening' },
      element('div', {}, element('h1', { tabindex: -1 }, 'What the archive holds'), lead),
      raysPicture(),
    ),
    faceHost,
    list,
    legend,
  );
  const host = {
    showFace: (face) => faceHost.replaceChildren(...(face ? [face] : [])),
    setStale: (isStale) => list.classList.toggle('is-stale', isStale),
    setRefused: () => list.replaceChildren(),
    hasPicture: () => list.childElementCount > 0,
  };
  const question = createQuestion(api, host);
  const pictures = new AbortController();

  function campaignSection(campaign, runs, state) {
    const name = campaign.name ?? campaign.id;
    return element(
      'section',
      { class: 'campaign', 'aria-label': `Campaign ${name}` },
      element(
        'div',
        { class: 'campaign-head' },
        element(
          'h2',
          {},
          element(
            'a',
            { href: `?${formatState(changed(emptyState, { campaign: campaign.id }))}`, 'data-link': true },
            name,
          ),
        ),
        element(
          'p',
          {},
          `${countText(campaign.runs ?? runs.length, 'run')}, ${countText(campaign.views ?? 0, 'viewing angle')}`,
        ),
      ),
      element(
        'ul',
        { class: 'run-cards' },
        runs.map((run) => runCard(run, state)),
      ),
    );
  }

  /** Small pictures come when they come; a run without one is no less a link. */
  async function addPictures(runs) {
    const end = begin();
    try {
      await addPicturesOneByOne(runs);
    } finally {
      end();
    }
  }

  async function addPicturesOneByOne(runs) {
    const models = new Map();
    for (const run of runs.slice(0, mostPictures)) {
      const path = `${api.runPath(run.id, 'field-of-regard')}?quantity=opd_rms_mean`;
      try {
        const { result } = await api.answer(path, { signal: pictures.signal });
        models.set(run.id, fieldModel(result, { state: emptyState, checks: new Map() }));
        drawPictures(models);
      } catch (error) {
        if (error.name === 'AbortError') return;
      }
    }
  }

  /** All on one scale, or the colours of two runs could not be compared. */
  function drawPictures(models) {
    const whole = tightLimits([...models.values()].flatMap(({ views }) => views.map(({ value }) => value)));
    for (const [id, model] of models) {
      const known = extent(model.views.map(({ value }) => value));
      if (!known) continue;
      const [low, high] = whole;
      list
        .querySelector(`[data-run="${CSS.escape(id)}"]`)
        ?.replaceChildren(fieldThumbnail({ ...model, low, high }, { width: 216, height: 132 }));
      const range = list.querySelector(`[data-range="${CSS.escape(id)}"]`);
      if (range)
        range.textContent = `OPD_rms ${numberText(known[0], 3)} to ${readingText(known[1], null, null, model.unit)}`;
    }
    const [first] = models.values();
    const scale = `from ${statedText(whole[0])} (dark) to ${quantityText(statedText(whole[1]), first.unit)} (light)`;
    legend.textContent = `The maps show OPD_rms, mean over time, over azimuth and elevation, all on one scale: ${scale}.`;
  }

  function draw({ campaigns, runs, state }) {
    const wanted = state.campaign ? campaigns.filter(({ id }) => id === state.campaign) : campaigns;
    if (campaigns.length === 0) {
      lead.textContent = 'No view is indexed yet.';
      list.replaceChildren(
        emptyFace(
          'Nothing here yet',
          'While indexing runs, views appear as they are read; the state is shown at the top right. ',
          'Otherwise point the service at a folder of wavefront files: ',
          element('code', {}, 'bentlight serve --archive DIR --state DIR'),
        ),
      );
      return;
    }
    if (wanted.length === 0) {
      list.replaceChildren(
        emptyFace(
          'No such campaign',
          `The archive holds no campaign ${state.campaign}. `,
          element('a', { href: '?', 'data-link': true }, 'Show all campaigns'),
        ),
      );
      return;
    }
    const views = campaigns.reduce((sum, campaign) => sum + (campaign.views ?? 0), 0);
    const counts = [
      countText(campaigns.length, 'campaign'),
      countText(runs.length, 'run'),
      countText(views, 'viewing angle'),
    ];
    lead.textContent = `${counts.join(', ')}. Choose a run to see its field of regard.`;
    list.replaceChildren(
      ...wanted.map((campaign) =>
        campaignSection(
          campaign,
          runs.filter((run) => run.campaign === campaign.id || run.campaign === campaign.name),
          state,
        ),
      ),
    );
    addPictures(runs.filter((run) => list.querySelector(`[data-run="${CSS.escape(run.id)}"]`)));
  }

  return {
    update(state) {
      const ask = async (options) => {
        const [campaigns, runs] = await Promise.all([api.campaigns(options), api.runs(null, options)]);
        return { campaigns, runs, state };
      };
      question.put(`archive ${state.campaign ?? ''}`, ask, draw);
    },
    refresh() {
      question.reset();
    },
    unmount() {
      question.stop();
      pictures.abort();
    },
  };
}
