// Scales from numbers to pixels and back, and limits that suit numbers.

/** @typedef {{at: (value: number) => number, invert: (pixel: number) => number, domain: [number, number]}} Scale */

/** @returns {Scale} */
export function linearScale([low, high], [start, end]) {
  const stretch = high === low ? 0 : (end - start) / (high - low);
  return {
    domain: [low, high],
    at: (value) => (stretch === 0 ? (start + end) / 2 : start + (value - low) * stretch),
    invert: (pixel) => (stretch === 0 ? low : low + (pixel - start) / stretch),
  };
}

/** Decades of equal length; numbers must be positive. @returns {Scale} */
export function logScale([low, high], [start, end]) {
  const inner = linearScale([Math.log10(low), Math.log10(high)], [start, end]);
  return {
    domain: [low, high],
    at: (value) => inner.at(Math.log10(value)),
    invert: (pixel) => 10 ** inner.invert(pixel),
  };
}

/** Least and greatest of the finite numbers; null when there are none. */
export function extent(values) {
  let low = Infinity,
    high = -Infinity;
  for (const value of values) {
    if (value === null || !Number.isFinite(value)) continue;
    if (value < low) low = value;
    if (value > high) high = value;
  }
  return low <= high ? [low, high] : null;
}

/** The next number of the kind 1, 1.5, 2, 3, 4, 5, 6, 8 times a power of ten that is not below `size`. */
export function niceAbove(size) {
  if (!(size > 0)) return 1;
  const decade = 10 ** Math.floor(Math.log10(size));
  const step = [1, 1.5, 2, 3, 4, 5, 6, 8, 10].find((each) => each * decade >= size * (1 - 1e-9)) ?? 10;
  return Number((step * decade).toPrecision(3));
}

/** Limits for differences: zero in the middle. */
export function symmetricLimits(values) {
  const range = extent(values);
  const limit = range ? niceAbove(Math.max(Math.abs(range[0]), Math.abs(range[1]))) : 1;
  return [-limit, limit];
}

/** Limits for sizes: tight about the numbers, rounded outwards to a fiftieth of their span. */
export function tightLimits(values) {
  const range = extent(values);
  if (!range) return [0, 1];
  const [low, high] = range;
  if (low === high) return low === 0 ? [0, 1] : [Math.min(0, 2 * low), Math.max(0, 2 * low)];
  const grain = 10 ** Math.floor(Math.log10((high - low) / 5));
  const round = (value) => Number(value.toPrecision(12));
  return [round(Math.floor(low / grain) * grain), round(Math.ceil(high / grain) * grain)];
}

/** Range with a margin, for lines that should not touch the frame; zero stays the foot of what is never negative. */
export function paddedRange([low, high], share = 0.06) {
  if (low === high) return [low - (Math.abs(low) || 1) * 0.5, high + (Math.abs(high) || 1) * 0.5];
  const margin = (high - low) * share;
  return [low >= 0 && low - margin < 0 ? 0 : low - margin, high + margin];
}

/** A range about `centre`, `factor` times as wide, kept inside `bounds`. */
export function zoomedRange([low, high], centre, factor, bounds) {
  const width = Math.min((high - low) * factor, bounds[1] - bounds[0]);
  const share = high > low ? (centre - low) / (high - low) : 0.5;
  const start = Math.min(Math.max(centre - share * width, bounds[0]), bounds[1] - width);
  return [start, start + width];
}
