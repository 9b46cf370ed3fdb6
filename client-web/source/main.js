// Reads the address, mounts the panels of the stage it names, and tells them of every change.

import { ApiError, createApi } from './api.js';
import { begin } from './busy.js';
import { debounced, element, part } from './dom.js';
import { lostFace, refusalFace } from './faces.js';
import { watchIndex } from './index_watch.js';
import { panels } from './panels/list.js';
import { angleText } from './quantities.js';
import { followTheme } from './theme.js';
import { changed, formatState, isNewPlace, parseState, withRun } from './view_state.js';

const api = createApi();
const shell = {
  rail: part(document, '#rail', 'main'),
  main: part(document, '#content', 'main'),
  trail: part(document, '#trail', 'main'),
  notice: part(document, '#notice', 'main'),
};

/** @type {import('./view_state.js').ViewState} */
let state = parseState(location.search).state;
let subject = { run: null, view: null };
let loading = new AbortController();
/** Where the rail has room; the same measure as in base.css. */
const isWide = matchMedia('(min-width: 62rem)');
/** Mounted panels by name and place. @type {Map<string, {root: HTMLElement, panel: object}>} */
const mounted = new Map();

const stageOf = ({ show, view, run }) => show ?? (view ? 'view' : run ? 'run' : 'archive');

// ---- Going somewhere

const writeAddress = debounced(400, () => {
  writeAddress.isPending = false;
  history.replaceState(null, '', addressOf(state));
});

const addressOf = (some) => `${location.pathname}${formatState(some) ? `?${formatState(some)}` : ''}`;

/**
 * Changes the state. A new place gets an entry in the history; an adjustment only mends the address, and one that is
 * passing (a frame while playing) does so when things have come to rest.
 */
function go(changes, { isPassing = false } = {}) {
  moveTo(changed(state, changes), { isPassing });
}

function moveTo(next, { isPassing = false } = {}) {
  if (formatState(next) === formatState(state)) return;
  const before = state;
  state = next;
  if (isNewPlace(before, next)) {
    settleAddress(before);
    history.pushState(null, '', addressOf(next));
    sayRefused([]);
  } else if (isPassing) {
    writeAddress.isPending = true;
    writeAddress();
  } else {
    settleAddress(next);
    history.replaceState(null, '', addressOf(next));
  }
  show({ isNewSubject: before.view !== next.view || before.run !== next.run || before.show !== next.show });
}

/** An address that still waits to be written goes into the entry it belongs to. */
function settleAddress(to) {
  writeAddress.cancel();
  if (writeAddress.isPending) history.replaceState(null, '', addressOf(to));
  writeAddress.isPending = false;
}

addEventListener('popstate', () => {
  writeAddress.cancel();
  writeAddress.isPending = false;
  readAddress();
});

function readAddress() {
  const { state: next, refused } = parseState(location.search);
  const before = state;
  state = next;
  sayRefused(refused);
  show({ isNewSubject: before.view !== next.view || before.run !== next.run || before.show !== next.show });
}

/** Plain clicks on our own links change the state; with a key held the browser does what it always does. */
document.addEventListener('click', (event) => {
  const link = event.target.closest('a[href^="?"], a[href="./"]');
  if (
    !link ||
    event.defaultPrevented ||
    event.button !== 0 ||
    event.metaKey ||
    event.ctrlKey ||
    event.shiftKey ||
    event.altKey
  )
    return;
  event.preventDefault();
  const href = link.getAttribute('href');
  moveTo(parseState(href.startsWith('?') ? href : '').state);
});

// ---- Showing what is there

function sayRefused(refused) {
  shell.notice.hidden = refused.length === 0;
  shell.notice.replaceChildren(
    ...refused.map(({ name, text, reason }) =>
      element('p', {}, 'Left aside from the address: ', element('code', {}, `${name}=${text}`), `, as ${reason}.`),
    ),
  );
}

/** Puts the stage's panels in their order, keeping those that stay. */
async function arrange(stage) {
  const wanted = panels.filter(({ stages }) => stages.includes(stage));
  const keys = new Set(wanted.map(({ name, place }) => `${name} ${place}`));
  for (const [key, { root, panel }] of mounted) {
    if (keys.has(key)) continue;
    panel.unmount();
    root.remove();
    mounted.delete(key);
  }
  document.body.dataset.stage = stage;
  shell.rail.hidden = !isWide.matches || !wanted.some(({ place }) => place === 'rail');
  const modules = await Promise.all(wanted.map(({ name }) => import(`./panels/${name}.js`)));
  if (stage !== stageOf(state)) return false;
  const last = { rail: null, main: null };
  wanted.forEach(({ name, place, width }, i) => {
    const key = `${name} ${place}`;
    const root = mounted.get(key)?.root ?? element('section', { class: `panel width-${width}`, data: { panel: name } });
    // In the document before it is mounted: panels measure the room they have.
    const home = isWide.matches ? place : 'main';
    standAfter(shell[home], last[home], root);
    last[home] = root;
    if (!mounted.has(key)) mounted.set(key, { root, panel: modules[i].mount(root, { api, go, place }) });
  });
  return true;
}

/** Puts `root` behind `before`, or first; one that stands there already is not touched, so that it keeps the focus. */
function standAfter(parent, before, root) {
  if (root.parentElement === parent && root.previousElementSibling === before) return;
  if (before) before.after(root);
  else parent.prepend(root);
}

async function loadSubject() {
  loading.abort();
  loading = new AbortController();
  const { signal } = loading;
  if (state.show) return { run: null, view: null };
  const view = state.view
    ? subject.view?.id === state.view
      ? subject.view
      : await api.view(state.view, { signal })
    : null;
  const runId = view?.run ?? state.run;
  const run = runId ? (subject.run?.id === runId ? subject.run : await api.run(runId, { signal })) : null;
  return { run, view };
}

let showing = 0;

async function show(change = {}) {
  const end = begin();
  try {
    await showNow(++showing, change);
  } finally {
    end();
  }
}

async function showNow(mine, { isNewSubject = false }) {
  const stage = stageOf(state);
  try {
    const next = await loadSubject();
    if (mine !== showing) return;
    subject = next;
  } catch (error) {
    if (error.name !== 'AbortError' && mine === showing) showFailure(error);
    return;
  }
  part(document, '#failure', 'main').replaceChildren();
  shell.main.hidden = false;
  if (!(await arrange(stage)) || mine !== showing) return;
  nameThePlace(stage);
  for (const { panel } of mounted.values()) panel.update(state, subject);
  if (isNewSubject) lookAtIt();
}

/** The focus and the eye go to the new subject; but who walks from angle to angle in the rail stays there. */
function lookAtIt() {
  if (shell.rail.contains(document.activeElement)) return;
  shell.main.querySelector('h1')?.focus({ preventScroll: true });
  scrollTo({ top: 0 });
}

/** The subject itself is not there, or cannot be asked for. */
function showFailure(error) {
  const again = () => show();
  const face =
    error instanceof ApiError
      ? refusalFace(error)
      : lostFace(error, { seconds: 5, hasOld: mounted.size > 0, retry: again });
  part(document, '#failure', 'main').replaceChildren(face);
  if (error instanceof ApiError) {
    shell.main.hidden = true;
    shell.rail.hidden = true;
    face.append(element('p', {}, element('a', { href: './' }, 'Show what the archive holds')));
    face.focus();
  } else {
    setTimeout(again, 5000);
  }
}

function nameThePlace(stage) {
  const { run, view } = subject;
  const steps = [];
  if (run?.campaign)
    steps.push([run.campaign_name ?? run.campaign, changed(parseState('').state, { campaign: run.campaign })]);
  if (run) steps.push([run.name ?? run.id, withRun(state, run.id)]);
  if (view) steps.push([angleText(view), state]);
  if (stage === 'index') steps.push(['Index', state]);
  shell.trail.replaceChildren(
    ...steps.map(([text, target], i) =>
      element(
        'li',
        {},
        i === steps.length - 1
          ? element('span', { 'aria-current': 'page' }, text)
          : element('a', { href: `?${formatState(target)}` }, text),
      ),
    ),
  );
  document.title = [...steps.map(([text]) => text).reverse(), 'Bentlight'].join(' · ');
}

// ---- Things that hold for the whole page

addEventListener('refusal', (event) => {
  for (const { panel } of mounted.values()) panel.refuse?.(event.detail);
});

document.addEventListener('click', (event) => {
  for (const menu of document.querySelectorAll('details.menu[open]'))
    if (!menu.contains(event.target)) menu.open = false;
});

const keysDialog = part(document, '#keys-dialog', 'main');
part(document, '#keys-button', 'main').addEventListener('click', () => keysDialog.showModal());
document.addEventListener('keydown', (event) => {
  const menu = event.target.closest?.('details.menu[open]');
  if (event.key === 'Escape' && menu) {
    menu.open = false;
    part(menu, 'summary', 'menu').focus();
  }
  // A character key works only where no text is typed: with a plot focused, or nothing.
  const isFree =
    event.target === document.body || event.target.matches?.('[role=slider], [role=application], .view-link');
  if (event.key === '?' && isFree) keysDialog.showModal();
});

addEventListener('unhandledrejection', (event) => {
  shell.notice.hidden = false;
  shell.notice.append(
    element(
      'p',
      { role: 'alert' },
      `The page has a fault: ${event.reason?.message ?? event.reason}. Loading it again may help.`,
    ),
  );
});

isWide.addEventListener('change', () => arrange(stageOf(state)));

followTheme(part(document, '#theme', 'main'), () => {
  for (const { panel } of mounted.values()) panel.repaint?.();
});

watchIndex(part(document, '#index-line', 'main'), api, () => {
  api.forget();
  subject = { run: null, view: null };
  for (const { panel } of mounted.values()) panel.refresh?.();
  show();
});

readAddress();
