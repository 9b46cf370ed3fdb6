// Colour tables computed in OKLab (Ottosson 2020), so that equal steps of a number look like equal steps of colour.
// One runs in lightness only one way (rms), one has its zero in the middle and arms of equal lightness (OPD).

export const tableSize = 256;

/** OKLab lightness, chroma and hue to linear sRGB; each 0..1 when inside the gamut. */
export function linearFromOklch(lightness, chroma, hueDegrees) {
  const a = chroma * Math.cos((hueDegrees * Math.PI) / 180);
  const b = chroma * Math.sin((hueDegrees * Math.PI) / 180);
  const l = (lightness + 0.3963377774 * a + 0.2158037573 * b) ** 3;
  const m = (lightness - 0.1055613458 * a - 0.0638541728 * b) ** 3;
  const s = (lightness - 0.0894841775 * a - 1.291485548 * b) ** 3;
  return [
    4.0767416621 * l - 3.3077115913 * m + 0.2309699292 * s,
    -1.2684380046 * l + 2.6097574011 * m - 0.3413193965 * s,
    -0.0041960863 * l - 0.7034186147 * m + 1.707614701 * s,
  ];
}

/** Linear sRGB to OKLab [L, a, b]. */
export function oklabFromLinear([red, green, blue]) {
  const l = Math.cbrt(0.4122214708 * red + 0.5363325363 * green + 0.0514459929 * blue);
  const m = Math.cbrt(0.2119034982 * red + 0.6806995451 * green + 0.1073969566 * blue);
  const s = Math.cbrt(0.0883024619 * red + 0.2817188376 * green + 0.6299787005 * blue);
  return [
    0.2104542553 * l + 0.793617785 * m - 0.0040720468 * s,
    1.9779984951 * l - 2.428592205 * m + 0.4505937099 * s,
    0.0259040371 * l + 0.7827717662 * m - 0.808675766 * s,
  ];
}

/** One linear sRGB component to 0..255 as stored (IEC 61966-2-1). */
function byteFromLinear(component) {
  const value = Math.min(1, Math.max(0, component));
  const encoded = value <= 0.0031308 ? 12.92 * value : 1.055 * value ** (1 / 2.4) - 0.055;
  return Math.round(255 * encoded);
}

/** 0..255 as stored to linear sRGB. */
export function linearFromByte(byte) {
  const value = byte / 255;
  return value <= 0.04045 ? value / 12.92 : ((value + 0.055) / 1.055) ** 2.4;
}

/** Light for much: deep indigo through teal to straw. t runs 0..1. */
export function sequentialColour(t) {
  // 0.076 fits into sRGB all along this path; the second part uses the room there is among the greens and yellows.
  const chroma = 0.076 + 0.6 * t ** 4 * (1 - t);
  return linearFromOklch(0.22 + 0.72 * t, chroma, 288 - 196 * t ** 0.88);
}

/** Blue below zero, orange above, nearly white at zero. t runs -1..1. */
export function divergingColour(t) {
  const size = Math.abs(t);
  return linearFromOklch(0.97 - 0.5 * size, 0.134 * size ** 0.6, t < 0 ? 255 : 45);
}

function table(colour) {
  const bytes = new Uint8ClampedArray(4 * tableSize);
  for (let i = 0; i < tableSize; ++i) {
    const linear = colour(i / (tableSize - 1));
    bytes.set([...linear.map(byteFromLinear), 255], 4 * i);
  }
  return bytes;
}

/** A colour map is its 256 colours as RGBA bytes and the same as 32-bit pixels of a canvas. */
function colourMap(name, colour) {
  const bytes = table(colour);
  return Object.freeze({ name, bytes, pixels: new Uint32Array(bytes.buffer) });
}

export const sequential = colourMap('sequential', sequentialColour);
export const diverging = colourMap('diverging', (t) => divergingColour(2 * t - 1));

/** Entry of the table for a number between the limits; numbers beyond take the end's colour. */
export function tableIndex(value, low, high) {
  const share = high > low ? (value - low) / (high - low) : 0.5;
  return Math.min(tableSize - 1, Math.max(0, Math.round(share * (tableSize - 1))));
}

/** "#rrggbb" of a table entry. */
export function hexColour(map, index) {
  const part = (k) => map.bytes[4 * index + k].toString(16).padStart(2, '0');
  return `#${part(0)}${part(1)}${part(2)}`;
}

/**
 * True when black text reads better than white on this entry. The two contrasts (WCAG 2.2) meet where the luminance is
 * sqrt(1.05 * 0.05) - 0.05, and are 4.58 there; any ink lighter than black would leave a gap below 4.5.
 */
export function isLight(map, index) {
  const [red, green, blue] = [0, 1, 2].map((k) => linearFromByte(map.bytes[4 * index + k]));
  return 0.2126 * red + 0.7152 * green + 0.0722 * blue > Math.sqrt(1.05 * 0.05) - 0.05;
}
