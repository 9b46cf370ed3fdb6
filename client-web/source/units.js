// Units as the server writes them, and as people read them.

import { superscript } from './numbers.js';

/** Units of optical path difference that a question may ask for, in the order of the form. */
export const lengthUnits = Object.freeze([
  { name: 'um', label: 'µm' },
  { name: 'nm', label: 'nm' },
  { name: 'waves', label: 'waves' },
  { name: 'normalised', label: 'normalised' },
]);

const symbols = { um: 'µm', deg: '°', ohm: 'Ω', 1: '' };

/**
 * A unit for people: "um2/Hz" as "µm²/Hz", "1" as nothing.
 *
 * @param {string} unit
 */
export function unitText(unit) {
  if (!unit) return '';
  return unit
    .split('/')
    .map((part) => part.split(/[ *]/).map(unitFactor).join('·'))
    .join('/')
    .replace(/^\//, '1/');
}

function unitFactor(factor) {
  if (factor in symbols) return symbols[factor];
  const power = /^([A-Za-zµ%°]+)\^?(-?\d+)$/.exec(factor);
  if (!power) return factor;
  return (symbols[power[1]] ?? power[1]) + superscript(power[2]);
}

/** "OPD (µm)", or the bare name when the unit is 1. */
export function withUnit(name, unit) {
  const text = unitText(unit);
  return text ? `${name} (${text})` : name;
}

/** "0.184 µm": a number's text and its unit, held together by a no-break space. */
export function quantityText(number, unit) {
  const text = unitText(unit);
  if (!text) return number;
  return text === '°' ? `${number}°` : `${number}\u00a0${text}`;
}

/**
 * What one unit of length stands for in this view, for the units that need saying.
 *
 * @param {string} unit  as in lengthUnits
 * @param {?{wavelength_m?: number, mach?: number, density_kg_m3?: number, reference_length_m?: number}} conditions
 */
export function unitMeaning(unit, conditions) {
  if (unit === 'waves') {
    const wavelength = conditions?.wavelength_m;
    return wavelength
      ? `one wave is ${Number((wavelength * 1e9).toPrecision(6))} nm`
      : 'one wave is the wavelength of each file';
  }
  if (unit === 'normalised') {
    return 'divided by (density / 1.225 kg/m³) · Mach² · reference length';
  }
  return '';
}
