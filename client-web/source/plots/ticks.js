// Where ticks stand and what they say.

import { grouped, superscript } from '../numbers.js';

/** Distance between ticks: 1, 2 or 5 times a power of ten, for about `wanted` ticks over `span`. */
export function tickStep(span, wanted) {
  const rough = span / Math.max(1, wanted);
  const decade = 10 ** Math.floor(Math.log10(rough));
  const share = rough / decade;
  return (share <= 1 ? 1 : share <= 2 ? 2 : share <= 5 ? 5 : 10) * decade;
}

/** Round numbers from low to high, about `wanted` of them. */
export function linearTicks(low, high, wanted = 5) {
  if (!(high > low)) return [low];
  const step = tickStep(high - low, wanted);
  const ticks = [];
  // Counted in steps, not added up, so that 0.3 does not become 0.30000000000000004.
  for (let k = Math.ceil(low / step - 1e-9); k <= high / step + 1e-9; ++k)
    ticks.push(Number((k * step).toPrecision(12)));
  return ticks;
}

/** Powers of ten from low to high, thinned to every second, third … when there are many. */
export function decadeTicks(low, high, wanted = 6) {
  const first = Math.ceil(Math.log10(low) - 1e-9),
    last = Math.floor(Math.log10(high) + 1e-9);
  const stride = Math.max(1, Math.ceil((last - first + 1) / wanted));
  const ticks = [];
  for (let power = first; power <= last; power += stride) ticks.push(10 ** power);
  return ticks;
}

/** "10⁻⁸" of a power of ten. */
export const decadeLabel = (value) => `10${superscript(Math.round(Math.log10(value)))}`;

/** Decimals that write a step exactly: 2 for 0.05 as for 0.25. */
function decimalsOf(step) {
  for (let decimals = 0; decimals < 12; ++decimals) {
    const scaled = step * 10 ** decimals;
    if (Math.abs(scaled - Math.round(scaled)) < 1e-6 * Math.max(1, scaled) && Math.round(scaled) > 0) return decimals;
  }
  return 12;
}

/**
 * Labels of evenly spaced ticks: as many decimals as their step needs, the same for all; powers of ten when the numbers
 * are very small or large.
 */
export function tickLabels(ticks) {
  if (ticks.length === 0) return [];
  const step = ticks.length > 1 ? Math.abs(ticks[1] - ticks[0]) : Math.abs(ticks[0]) || 1;
  const largest = Math.max(...ticks.map(Math.abs));
  const power = largest > 0 ? Math.floor(Math.log10(largest)) : 0;
  const isPlain = largest === 0 || (power >= -4 && power < 6);
  const scale = isPlain ? 1 : 10 ** power;
  const decimals = decimalsOf(step / scale);
  return ticks.map((tick) => {
    if (tick === 0) return '0';
    const [whole, fraction] = (Math.abs(tick) / scale).toFixed(decimals).split('.');
    const text = (tick < 0 ? '\u2212' : '') + grouped(whole) + (fraction ? `.${fraction}` : '');
    return isPlain ? text : `${text}×10${superscript(power)}`;
  });
}
