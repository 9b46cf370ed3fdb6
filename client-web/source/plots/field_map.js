// The field of regard as a map over azimuth and elevation: one link per view, one tab stop for all of them.

import { bottomAxis, colourBar, leftAxis, roomFor, ticksFor } from './axes.js';
import { hexColour, isLight, tableIndex } from './colour_maps.js';
import { livePalette } from './palette.js';
import { extent, linearScale } from './scales.js';
import { svg, toElement } from './svg_tree.js';

/**
 * @typedef {{id: string, azimuth: number, elevation: number, value: ?number, text: string, short: string, href: string,
 *            isFlawed: boolean}} FieldView  text: the whole reading; short: the number alone
 * @typedef {{views: FieldView[], map: object, low: number, high: number, barTitle: string}} FieldModel
 */

const margins = { left: 46, right: 70, top: 28, bottom: 42 };

/** Sorted distinct numbers; angles closer than a thousandth of a degree are one. */
function distinct(values) {
  const sorted = [...values].sort((a, b) => a - b);
  return sorted.filter((value, i) => i === 0 || value - sorted[i - 1] > 1e-3);
}

/** Least distance between neighbours; `fallback` for a single one. */
function spacing(sorted, fallback) {
  let least = Infinity;
  for (let i = 1; i < sorted.length; ++i) least = Math.min(least, sorted[i] - sorted[i - 1]);
  return Number.isFinite(least) ? least : fallback;
}

/** Views on a full grid get touching cells, scattered ones get discs. @param {FieldView[]} views */
function arrangement(views) {
  const azimuths = distinct(views.map(({ azimuth }) => azimuth)),
    elevations = distinct(views.map(({ elevation }) => elevation));
  const isGrid = azimuths.length * elevations.length <= 1.3 * views.length + 1;
  return { isGrid, cellWidth: spacing(azimuths, 10), cellHeight: spacing(elevations, 10) };
}

function layoutOf(model, width, height) {
  const box = { left: margins.left, top: margins.top, right: width - margins.right, bottom: height - margins.bottom };
  const { isGrid, cellWidth, cellHeight } = arrangement(model.views);
  const azimuth = extent(model.views.map((view) => view.azimuth)) ?? [0, 1];
  const elevation = extent(model.views.map((view) => view.elevation)) ?? [0, 1];
  const xs = linearScale([azimuth[0] - cellWidth / 2, azimuth[1] + cellWidth / 2], [box.left, box.right]);
  const ys = linearScale([elevation[0] - cellHeight / 2, elevation[1] + cellHeight / 2], [box.bottom, box.top]);
  const gap = 2;
  const cell = {
    width: Math.max(3, Math.abs(xs.at(cellWidth) - xs.at(0)) - gap),
    height: Math.max(3, Math.abs(ys.at(cellHeight) - ys.at(0)) - gap),
  };
  // Discs may overlap a little where angles crowd, but stay large enough to hit.
  const radius = Math.min(16, Math.max(5, Math.min(cell.width, cell.height) / 2));
  return { box, xs, ys, isGrid, cell, radius };
}

/** Shape, number and mark of one view. */
function viewNodes(model, layout, view, palette) {
  const { isGrid, cell, radius } = layout;
  const x = layout.xs.at(view.azimuth),
    y = layout.ys.at(view.elevation);
  const isKnown = view.value !== null;
  const index = isKnown ? tableIndex(view.value, model.low, model.high) : 0;
  const look = isKnown
    ? { fill: hexColour(model.map, index) }
    : { fill: palette.sheet, stroke: palette.rule, 'stroke-dasharray': '3 3' };
  const shape = isGrid
    ? svg('rect', {
        class: 'cell',
        x: (x - cell.width / 2).toFixed(1),
        y: (y - cell.height / 2).toFixed(1),
        width: cell.width.toFixed(1),
        height: cell.height.toFixed(1),
        rx: Math.min(3, cell.width / 6),
        ...look,
      })
    : svg('circle', { class: 'cell', cx: x.toFixed(1), cy: y.toFixed(1), r: radius, ...look });
  const dark = '#000000',
    light = '#ffffff';
  const contrast = !isKnown ? palette.soft : isLight(model.map, index) ? dark : light;
  const hasRoom = isGrid && cell.width >= 7.2 * view.short.length + 6 && cell.height >= 18;
  const corner = 9;
  return [
    shape,
    hasRoom &&
      svg(
        'text',
        { x: x.toFixed(1), y: y.toFixed(1), dy: '0.35em', 'text-anchor': 'middle', fill: contrast },
        view.short,
      ),
    view.isFlawed &&
      isGrid &&
      cell.width > 16 &&
      svg('path', {
        d: `M${(x + cell.width / 2 - corner).toFixed(1)} ${(y - cell.height / 2).toFixed(1)}h${corner}v${corner}Z`,
        fill: contrast,
      }),
    view.isFlawed && !isGrid && svg('circle', { cx: x.toFixed(1), cy: y.toFixed(1), r: 2.5, fill: contrast }),
  ];
}

function surroundings(model, layout, palette, id) {
  const { box, xs, ys } = layout;
  const outside = model.views.map(({ value }) => value).filter((value) => value !== null);
  return [
    leftAxis(
      box,
      ys,
      ticksFor(ys.domain, box.bottom - box.top, roomFor(box.bottom - box.top)),
      'elevation (°)',
      palette,
    ),
    bottomAxis(
      box,
      xs,
      ticksFor(xs.domain, box.right - box.left, box.right - box.left < 300 ? 42 : 72),
      'azimuth (°)',
      palette,
    ),
    colourBar(
      { x: box.right + 14, top: box.top, bottom: box.bottom },
      {
        map: model.map,
        low: model.low,
        high: model.high,
        title: model.barTitle,
        isCutLow: outside.some((value) => value < model.low),
        isCutHigh: outside.some((value) => value > model.high),
      },
      palette,
      id,
    ),
  ];
}

/** The map as nodes for a file. @param {FieldModel} model */
export function fieldNodes(model, { width, height, palette }) {
  const layout = layoutOf(model, width, height);
  return [
    surroundings(model, layout, palette, 'bar'),
    model.views.map((view) => viewNodes(model, layout, view, palette)),
  ];
}

/** A map without axes, as a small picture. @param {FieldModel} model */
export function fieldThumbnail(model, { width, height }) {
  const layout = layoutOf(model, width + margins.left + margins.right, height + margins.top + margins.bottom);
  return toElement(
    svg(
      'svg',
      {
        viewBox: `${margins.left} ${margins.top} ${width} ${height}`,
        width,
        height,
        'aria-hidden': 'true',
        class: 'thumbnail',
      },
      model.views.map(
        (view) => viewNodes(model, { ...layout }, { ...view, short: '', isFlawed: false }, livePalette)[0],
      ),
    ),
  );
}

/** The nearest view in a direction: little sideways, then near. */
function neighbour(views, from, right, up) {
  let best = null,
    least = Infinity;
  for (const view of views) {
    const along = right * (view.azimuth - from.azimuth) + up * (view.elevation - from.elevation);
    if (along <= 1e-6) continue;
    const across = Math.abs(up * (view.azimuth - from.azimuth)) + Math.abs(right * (view.elevation - from.elevation));
    const cost = along + 4 * across;
    if (cost < least) [best, least] = [view, cost];
  }
  return best;
}

let fieldCount = 0;

/**
 * A living map inside `root`.
 *
 * @param {{height: (width: number) => number, label: string, onCursor: (view: ?FieldView) => void}} options
 */
export function fieldMap(root, { height, label, onCursor }) {
  const host = document.createElement('div');
  host.className = 'field-map';
  host.setAttribute('role', 'group');
  host.setAttribute('aria-label', label);
  root.append(host);

  const barId = `field-bar-${++fieldCount}`;
  /** @type {?FieldModel} */
  let model = null;
  let selected = null; // id of the view that is open
  let stop = null; // id of the view that is the tab stop
  let links = new Map();
  let placedWidth = 0;

  const widthNow = () => Math.max(220, Math.floor(host.clientWidth));

  function linkOf(layout, view) {
    const link = svg(
      'a',
      {
        href: view.href,
        class: 'view-link',
        tabindex: view.id === stop ? 0 : -1,
        'aria-label': view.text,
        'data-view': view.id,
        'aria-current': view.id === selected ? 'true' : null,
        on: {
          focus: () => focused(view),
          pointerenter: () => onCursor(view),
          pointerleave: () => onCursor(null),
          keydown: (event) => pressed(event, view),
        },
      },
      viewNodes(model, layout, view, livePalette),
    );
    return toElement(link);
  }

  function place() {
    if (!model || model.views.length === 0) {
      host.replaceChildren();
      return;
    }
    const hadFocus = host.contains(document.activeElement);
    const width = widthNow(),
      tall = height(width);
    placedWidth = width;
    if (!model.views.some(({ id }) => id === stop))
      stop = model.views.some(({ id }) => id === selected) ? selected : model.views[0].id;
    const layout = layoutOf(model, width, tall);
    const picture = toElement(
      svg(
        'svg',
        { width, height: tall, viewBox: `0 0 ${width} ${tall}` },
        surroundings(model, layout, livePalette, barId),
      ),
    );
    links = new Map(model.views.map((view) => [view.id, linkOf(layout, view)]));
    // In reading order for a screen reader: highest elevation first; the open one last, so that its ring is on top.
    const order = [...model.views].sort((a, b) => b.elevation - a.elevation || a.azimuth - b.azimuth);
    for (const view of order) picture.append(links.get(view.id));
    host.replaceChildren(picture);
    if (hadFocus) links.get(stop)?.focus();
  }

  function focused(view) {
    links.get(stop)?.setAttribute('tabindex', '-1');
    stop = view.id;
    links.get(stop)?.setAttribute('tabindex', '0');
    onCursor(view);
  }

  function pressed(event, view) {
    const moves = { ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, 1], ArrowDown: [0, -1] };
    const order = [...model.views].sort((a, b) => b.elevation - a.elevation || a.azimuth - b.azimuth);
    const next =
      event.key in moves
        ? neighbour(model.views, view, ...moves[event.key])
        : event.key === 'Home'
          ? order[0]
          : event.key === 'End'
            ? order.at(-1)
            : undefined;
    if (next === undefined || event.ctrlKey || event.metaKey || event.altKey) return;
    event.preventDefault();
    if (next) links.get(next.id).focus();
  }

  const resize = new ResizeObserver(() => widthNow() !== placedWidth && place());
  resize.observe(host);

  return {
    /** Shows another model, with one of its views marked as open. @param {FieldModel} next */
    draw(next, selectedView) {
      model = next;
      if (selected !== selectedView && !host.contains(document.activeElement)) stop = selectedView ?? stop;
      selected = selectedView;
      place();
    },
    destroy() {
      resize.disconnect();
      host.remove();
    },
  };
}
