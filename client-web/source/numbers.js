// Numbers as people read them: significant figures that follow the uncertainty, a true minus sign, thin-space
// grouping, powers of ten. Files and the clipboard get plain digits instead.

const thinSpace = '\u2009';
const minus = '\u2212';
const superscripts = { '-': '⁻', 0: '⁰', 1: '¹', 2: '²', 3: '³', 4: '⁴', 5: '⁵', 6: '⁶', 7: '⁷', 8: '⁸', 9: '⁹' };

/** "-8" as "⁻⁸". */
export const superscript = (whole) => [...String(whole)].map((digit) => superscripts[digit]).join('');

/** Digits of a whole number in groups of three, from 10 000 on. */
export function grouped(digits) {
  return digits.length > 4 ? digits.replace(/\B(?=(\d{3})+$)/g, thinSpace) : digits;
}

/** A whole number, never rounded: 100 000. */
export function wholeText(value) {
  if (value === null || value === undefined) return 'unknown';
  return (value < 0 ? minus : '') + grouped(String(Math.abs(value)));
}

function fixedText(size, decimals) {
  const [whole, fraction] = size.toFixed(decimals).split('.');
  return grouped(whole) + (fraction ? `.${fraction}` : '');
}

/**
 * A number with `digits` significant figures; powers of ten below 0.001 and from a million on.
 * What is not a number is "no value".
 */
export function numberText(value, digits = 4) {
  if (value === null || value === undefined || !Number.isFinite(value)) return 'no value';
  if (value === 0) return '0';
  const sign = value < 0 ? minus : '';
  const size = Number(Math.abs(value).toPrecision(digits));
  const decade = Math.floor(Math.log10(size));
  if (decade < -3 || decade > 5) {
    const [mantissa, power] = size.toExponential(digits - 1).split('e');
    return `${sign}${mantissa}${thinSpace}×${thinSpace}10${superscript(Number(power))}`;
  }
  return sign + fixedText(size, Math.max(0, digits - 1 - decade));
}

/** A number as it was stated, without zeros that were not: Mach 0.45. */
export function statedText(value, digits = 6) {
  if (!Number.isFinite(value)) return 'no value';
  const text = numberText(value, digits);
  return text.includes('.') ? text.replace(/\.?0+(?=\u2009×|$)/, '') : text;
}

/** A share as a percentage: 0.95 as "95 %". */
export const percentText = (share, digits = 3) => `${statedText(share * 100, digits)}\u00a0%`;

/** A number with the decimals that tell apart steps of `step`: instants along an axis. */
export function steppedText(value, step) {
  const decimals = Math.min(12, Math.max(0, Math.ceil(-Math.log10(step) - 1e-9)));
  return (value < 0 ? minus : '') + fixedText(Math.abs(value), decimals);
}

/** How many decimals show two significant figures of an uncertainty; null when there is none to go by. */
export function decimalsFor(uncertainty) {
  if (!Number.isFinite(uncertainty) || uncertainty <= 0) return null;
  return Math.max(0, 1 - Math.floor(Math.log10(uncertainty)));
}

/**
 * A value with its interval, all with as many decimals as the interval's half width calls for, but never fewer than
 * three figures of the value: a wide interval is no reason to hide what was found.
 *
 * @param {{value: number, low?: number, high?: number}} value
 * @returns {{value: string, low: ?string, high: ?string}}
 */
export function intervalText({ value, low = null, high = null }) {
  const needed = low === null || high === null ? null : decimalsFor((high - low) / 2);
  const decimals =
    needed === null || value === 0 ? needed : Math.max(needed, 2 - Math.floor(Math.log10(Math.abs(value))));
  const largest = Math.max(Math.abs(value), Math.abs(low ?? 0), Math.abs(high ?? 0));
  // Beyond the range of plain decimals powers of ten read better, and nothing lines up anyway.
  if (decimals === null || decimals > 6 || largest >= 1e6) {
    return {
      value: numberText(value),
      low: low === null ? null : numberText(low),
      high: high === null ? null : numberText(high),
    };
  }
  const text = (number) => (number < 0 ? minus : '') + fixedText(Math.abs(number), decimals);
  return { value: text(value), low: text(low), high: text(high) };
}

/** Plain digits for files: the shortest that give the same double back; an empty field for no value. */
export function plainNumber(value) {
  return value === null || value === undefined || !Number.isFinite(value) ? '' : String(value);
}

/** Bytes in binary units: 1.97 MiB. */
export function bytesText(bytes) {
  const units = ['bytes', 'KiB', 'MiB', 'GiB', 'TiB', 'PiB'];
  let step = 0;
  for (let rest = bytes; rest >= 1024 && step < units.length - 1; rest /= 1024) ++step;
  const value = bytes / 1024 ** step;
  return `${step === 0 ? wholeText(bytes) : numberText(value, value >= 1000 ? 4 : 3)} ${units[step]}`;
}

/** Seconds that are still to wait: "8 s", "3 min". */
export function waitText(seconds) {
  if (seconds < 1) return 'less than a second';
  if (seconds < 100) return `${Math.round(seconds)} s`;
  return seconds < 5400 ? `${Math.round(seconds / 60)} min` : `${numberText(seconds / 3600, 2)} h`;
}

/** "1 view", "24 views". */
export function countText(count, one, many = `${one}s`) {
  return `${wholeText(count)} ${count === 1 ? one : many}`;
}
