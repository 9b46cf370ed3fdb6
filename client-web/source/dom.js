// Small helpers over the document. Text is always set as text: names in the archive are somebody else's.

/**
 * @param {string} name
 * @param {Object} properties  `on` holds listeners, `class` the classes, `data` the dataset; true and false set or
 *                             leave out an attribute; the rest are attributes
 */
export function element(name, properties = {}, ...children) {
  const made = document.createElement(name);
  for (const [key, value] of Object.entries(properties)) {
    if (value === null || value === undefined || value === false) continue;
    if (key === 'on') for (const [event, listener] of Object.entries(value)) made.addEventListener(event, listener);
    else if (key === 'data') Object.assign(made.dataset, value);
    else made.setAttribute(key, value === true ? '' : value);
  }
  made.append(...children.flat(Infinity).filter((child) => child !== null && child !== undefined && child !== false));
  return made;
}

/** The element under `root`, or an error that says who misses what. */
export function part(root, selector, whose) {
  const found = root.querySelector(selector);
  if (!found) throw new Error(`${whose}: the page has no ${selector}`);
  return found;
}

/** A copy of a template of index.html. */
export function fromTemplate(id) {
  const template = document.getElementById(id);
  if (!template) throw new Error(`the page has no template ${id}`);
  return template.content.firstElementChild.cloneNode(true);
}

/** Calls `act` once things have been quiet for `milliseconds`. */
export function debounced(milliseconds, act) {
  let timer = null;
  const call = (...given) => {
    clearTimeout(timer);
    timer = setTimeout(() => act(...given), milliseconds);
  };
  call.cancel = () => clearTimeout(timer);
  return call;
}
