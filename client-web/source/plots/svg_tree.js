// SVG as plain objects, so that one description serves the screen, the saved file and the print.

const namespace = 'http://www.w3.org/2000/svg';

/** @typedef {{name: string, attributes: Object<string, string|number>, children: (SvgNode|string)[]}} SvgNode */

/** @returns {SvgNode} */
export function svg(name, attributes = {}, ...children) {
  return {
    name,
    attributes,
    children: children.flat(Infinity).filter((child) => child !== null && child !== undefined && child !== false),
  };
}

/** A living element; `on` of the attributes holds listeners. */
export function toElement(node) {
  const element = document.createElementNS(namespace, node.name);
  for (const [name, value] of Object.entries(node.attributes)) {
    if (name === 'on') for (const [event, listener] of Object.entries(value)) element.addEventListener(event, listener);
    else if (value !== null && value !== undefined) element.setAttribute(name, value);
  }
  for (const child of node.children) element.append(typeof child === 'string' ? child : toElement(child));
  return element;
}

const escaped = (text) =>
  String(text).replace(/[&<>"]/g, (c) => ({ '&': '&amp;', '<': '&lt;', '>': '&gt;', '"': '&quot;' })[c]);

/** Text of a node, for a file. Characters that XML does not allow are dropped. */
export function toText(node) {
  const attributes = Object.entries(node.attributes)
    .filter(([name, value]) => name !== 'on' && value !== null && value !== undefined)
    .map(([name, value]) => ` ${name}="${escaped(value)}"`)
    .join('');
  const children = node.children.map((child) => (typeof child === 'string' ? escaped(child) : toText(child))).join('');
  return `<${node.name}${attributes}>${children}</${node.name}>`.replace(
    /[\u0000-\u0008\u000b\u000c\u000e-\u001f]/g,
    '',
  );
}

/** A whole document of `width` by `height` with metadata lines in it. */
export function toDocument(width, height, children, { title, lines = [] }) {
  const root = svg(
    'svg',
    {
      xmlns: namespace,
      width,
      height,
      viewBox: `0 0 ${width} ${height}`,
      'font-family': 'Helvetica, Arial, sans-serif',
      'font-size': 12,
    },
    svg('title', {}, title),
    svg('desc', {}, lines.join('\n')),
    children,
  );
  return `<?xml version="1.0" encoding="UTF-8"?>\n${toText(root)}\n`;
}

/** Path through points; a gap wherever one of the numbers is not finite. Pixels to a tenth. */
export function linePath(xs, ys, xScale, yScale) {
  let path = '';
  let isDown = false;
  for (let i = 0; i < xs.length; ++i) {
    const x = xs[i],
      y = ys[i];
    const isDrawn = x !== null && y !== null && Number.isFinite(x) && Number.isFinite(y);
    if (isDrawn) path += `${isDown ? 'L' : 'M'}${xScale.at(x).toFixed(1)} ${yScale.at(y).toFixed(1)}`;
    isDown = isDrawn;
  }
  return path;
}

/** Closed paths between two curves, one for each stretch without gaps. */
export function bandPath(xs, lows, highs, xScale, yScale) {
  const isWhole = (i) => [xs[i], lows[i], highs[i]].every((value) => value !== null && Number.isFinite(value));
  const point = (i, values) => `${xScale.at(xs[i]).toFixed(1)} ${yScale.at(values[i]).toFixed(1)}`;
  let path = '';
  for (let i = 0; i < xs.length;) {
    if (!isWhole(i)) {
      ++i;
      continue;
    }
    let end = i;
    while (end < xs.length && isWhole(end)) ++end;
    const there = [],
      back = [];
    for (let k = i; k < end; ++k) {
      there.push(point(k, highs));
      back.unshift(point(k, lows));
    }
    path += `M${there.concat(back).join('L')}Z`;
    i = end;
  }
  return path;
}
