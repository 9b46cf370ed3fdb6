// Colours of what is not data: read from the page's custom properties for the screen, fixed for files and print.

/**
 * @typedef {{ink: string, soft: string, rule: string, grid: string, sheet: string, line: string, band: string,
 *            warm: string, fill: string}} Palette
 */

/** For files: dark on white, whatever the page looks like. @type {Palette} */
export const paperPalette = Object.freeze({
  ink: '#18202c',
  soft: '#4f5967',
  rule: '#8a929e',
  grid: '#e3e5e8',
  sheet: '#ffffff',
  line: '#1b5aa4',
  band: '#b9cfec',
  warm: '#b84e10',
  fill: '#9dbbe2',
});

/** For living SVG: custom properties, so that a change of theme needs no drawing. @type {Palette} */
export const livePalette = Object.freeze(
  Object.fromEntries(Object.keys(paperPalette).map((name) => [name, `var(--plot-${name})`])),
);

/** For a canvas, which does not follow CSS: the properties' values as they stand now. @returns {Palette} */
export function canvasPalette(element) {
  const style = getComputedStyle(element);
  return Object.fromEntries(
    Object.keys(paperPalette).map((name) => [
      name,
      style.getPropertyValue(`--plot-${name}`).trim() || paperPalette[name],
    ]),
  );
}
