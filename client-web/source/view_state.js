// The address and the state of the page: two pure functions, each the other's inverse. What the page shows follows
// from the address alone, so that a pasted link opens the same plots and two tabs share nothing.

/**
 * @typedef {Readonly<{
 *   campaign: ?string, run: ?string, view: ?string, show: ?string,
 *   from: ?string, to: ?string, first: ?string, last: ?string,
 *   aperture: ?string, obscuration: string, center: string, remove: string, mean_over: string, length_unit: string,
 *   field: string, quantity: string, zoom: ?[number, number], frame: ?number,
 *   frame_limit: ?number, mean_limit: ?number, rms_limits: ?[number, number], field_limits: ?[number, number]
 * }>} ViewState
 */

const longestText = 200;

const number = (text) => (/^[+-]?(\d+\.?\d*|\.\d+)(e[+-]?\d+)?$/i.test(text) ? Number(text) : NaN);

/** Kinds of value: how one is read from the address (undefined: not such a value), written, and described. */
const kinds = {
  text: {
    read: (text) => (text !== '' && text.length <= longestText && !/\p{Cc}/u.test(text) ? text : undefined),
    write: (value) => value,
    accepted: 'a short text',
  },
  choice: (...choices) => ({
    read: (text) => (choices.includes(text) ? text : undefined),
    write: (value) => value,
    accepted: `one of ${choices.join(', ')}`,
  }),
  wholeNumber: {
    read: (text) => (/^\d{1,15}$/.test(text) ? Number(text) : undefined),
    write: String,
    accepted: 'a whole number from 0',
  },
  positive: {
    read: (text) => (Number.isFinite(number(text)) && number(text) > 0 ? number(text) : undefined),
    write: String,
    accepted: 'a number above 0',
  },
  range: {
    read: (text) => {
      const ends = text.split('..').map(number);
      return ends.length === 2 && ends.every(Number.isFinite) && ends[0] < ends[1] ? Object.freeze(ends) : undefined;
    },
    write: ([low, high]) => `${low}..${high}`,
    accepted: 'two numbers as low..high',
  },
};

/** A part of the preparation is text here: the server alone knows what it accepts, and says so. */
const preparationDefaults = {
  from: null,
  to: null,
  first: null,
  last: null,
  aperture: null,
  obscuration: '0',
  center: '0,0',
  remove: 'piston,tilt,mean',
  mean_over: 'record',
  length_unit: 'um',
};

/** Every name an address may hold, in the order in which it is written. */
const fields = [
  { name: 'campaign', kind: kinds.text },
  { name: 'run', kind: kinds.text },
  { name: 'view', kind: kinds.text },
  { name: 'show', kind: kinds.choice('index') },
  ...Object.entries(preparationDefaults).map(([name, standard]) => ({ name, kind: kinds.text, standard })),
  { name: 'field', kind: kinds.text, standard: 'opd_rms_mean' },
  { name: 'quantity', kind: kinds.text, standard: 'opd_rms' },
  { name: 'zoom', kind: kinds.range },
  { name: 'frame', kind: kinds.wholeNumber },
  { name: 'frame_limit', kind: kinds.positive },
  { name: 'mean_limit', kind: kinds.positive },
  { name: 'rms_limits', kind: kinds.range },
  { name: 'field_limits', kind: kinds.range },
].map((field) => ({ standard: null, ...field }));

/** The state of an address without parameters. */
export const emptyState = Object.freeze(Object.fromEntries(fields.map(({ name, standard }) => [name, standard])));

/**
 * State of an address's query. What it cannot take over is listed, to be said to the person, and not dropped silently.
 *
 * @param {string} search  with or without the leading question mark
 * @returns {{state: ViewState, refused: {name: string, text: string, reason: string}[]}}
 */
export function parseState(search) {
  const state = { ...emptyState };
  const refused = [];
  const seen = new Set();
  for (const [name, text] of new URLSearchParams(search)) {
    const field = fields.find((each) => each.name === name);
    if (!field) {
      refused.push({ name, text, reason: 'the page knows no such name' });
    } else if (seen.has(name)) {
      refused.push({ name, text, reason: 'it is given twice; the first one holds' });
    } else {
      seen.add(name);
      const value = field.kind.read(text);
      if (value === undefined) refused.push({ name, text, reason: `it must be ${field.kind.accepted}` });
      else state[name] = value;
    }
  }
  return { state: Object.freeze(state), refused };
}

/**
 * Query of a state, without question mark; names at their default are left out.
 *
 * @param {ViewState} state
 */
export function formatState(state) {
  return fields
    .filter(({ name, standard }) => state[name] !== null && state[name] !== standard)
    .map(({ name, kind }) => `${name}=${readable(kind.write(state[name]))}`)
    .join('&');
}

/** Percent-encoded, but for the characters that may stand in a query and that people like to read. */
function readable(text) {
  return encodeURIComponent(text).replace(/%(2C|3A|2F|40)/g, (code) => decodeURIComponent(code));
}

/** A state with some names changed. */
export function changed(state, changes) {
  for (const name of Object.keys(changes)) {
    if (!(name in emptyState)) throw new Error(`view_state: there is no ${name} in the state`);
  }
  return Object.freeze({ ...state, ...changes });
}

/** The preparation of a state as parameters of a question: what differs from the server's defaults. */
export function preparation(state) {
  return Object.fromEntries(
    Object.entries(preparationDefaults)
      .filter(([name, standard]) => state[name] !== null && state[name] !== standard)
      .map(([name]) => [name, state[name]]),
  );
}

export const preparationNames = Object.freeze(Object.keys(preparationDefaults));

/** What a preparation looks like when nothing was chosen. */
export const defaultPreparation = Object.freeze({ ...preparationDefaults });

/** Names whose change is a place one wants to come back to; the rest are adjustments of the same place. */
const places = ['campaign', 'run', 'view', 'show', ...preparationNames, 'quantity', 'field'];

/** True when going from one state to the other deserves an entry in the browser's history. */
export function isNewPlace(before, after) {
  return places.some((name) => before[name] !== after[name]);
}

/** State of a view chosen in `state`: preparation and quantity stay, what belongs to the old view's record goes. */
export function withView(state, view) {
  return changed(state, { view, show: null, zoom: null, frame: null });
}

/** State of a run chosen in `state`: what was prepared stays, but for a window, which belongs to one record. */
export function withRun(state, run) {
  return changed(state, {
    run,
    view: null,
    show: null,
    zoom: null,
    frame: null,
    from: null,
    to: null,
    first: null,
    last: null,
    field_limits: null,
  });
}
