// Names of values, arrays and quantities for people. A name that is not listed is shown as it is, with spaces, so that
// what a later server adds appears without an edit here.

const labels = {
  opd_rms: 'OPD_rms',
  opd_rms_mean: 'OPD_rms, mean over time',
  opd_rms_std: 'OPD_rms, standard deviation',
  opd_rms_overall: 'OPD_rms, overall',
  opd_rms_median: 'OPD_rms, median',
  effective_samples: 'Effective samples',
  skewness: 'Skewness of OPD_rms',
  kurtosis: 'Kurtosis of OPD_rms',
  opd_rms_least: 'OPD_rms, least',
  opd_rms_greatest: 'OPD_rms, greatest',
  lognormal_median: 'Log-normal fit, median',
  halves_difference: 'Second half against first, in standard errors',
  reverse_arrangements: 'Reverse arrangements, in standard deviations',
  lognormal_sigma: 'Log-normal fit, σ',
  lognormal_ks_distance: 'Distance to the log-normal fit',
  frames: 'Frames',
  piston: 'Piston',
  tip: 'Tip',
  tilt: 'Tilt',
  mach: 'Mach number',
  velocity_m_s: 'Velocity',
  density_kg_m3: 'Density',
  temperature_k: 'Temperature',
  wavelength_m: 'Wavelength',
  reference_length_m: 'Reference length',
  aperture_diameter_m: 'Aperture diameter',
  gladstone_dale_m3_kg: 'Gladstone–Dale constant',
};

/** A name for people: the trade's where there is one. */
export function labelOf(name) {
  if (name in labels) return labels[name];
  const [kind, ...rest] = name.split(':');
  if (kind === 'coefficient') return `Coefficient of mode ${rest[0]}`;
  if (kind === 'signal') return `Signal ${rest.join(':')}`;
  if (kind === 'point') return `OPD at row ${rest[0]}, column ${rest[1]}`;
  const words = name
    .replace(/^opd_rms_/, 'OPD_rms, ')
    .replaceAll('_', ' ')
    .replace('OPD rms', 'OPD_rms');
  return words.charAt(0).toUpperCase() + words.slice(1);
}

const conditionUnits = {
  velocity_m_s: 'm/s',
  density_kg_m3: 'kg/m3',
  temperature_k: 'K',
  wavelength_m: 'm',
  reference_length_m: 'm',
  aperture_diameter_m: 'm',
  gladstone_dale_m3_kg: 'm3/kg',
  azimuth_deg: 'deg',
  elevation_deg: 'deg',
};

/** Unit that a condition's name ends with. */
export const conditionUnit = (name) => conditionUnits[name] ?? '1';

/** Values of `statistics` that may be mapped over the viewing angles, in the order of the form. */
export const fieldQuantities = Object.freeze([
  'opd_rms_mean',
  'opd_rms_overall',
  'opd_rms_std',
  'skewness',
  'kurtosis',
  'effective_samples',
  'lognormal_sigma',
]);

/** Quantities of a view that can be drawn against time. */
export function seriesQuantities(view) {
  const signals = (view?.signals ?? []).map(({ name }) => `signal:${name}`);
  return ['opd_rms', 'piston', 'tip', 'tilt', 'coefficient:4', 'coefficient:5', 'coefficient:6', ...signals];
}

/** Azimuth and elevation of a view, for people. */
export function angleText({ azimuth_deg: azimuth, elevation_deg: elevation }) {
  const degrees = (value) =>
    value === null || value === undefined ? 'unknown' : `${String(value).replace('-', '\u2212')}°`;
  return `azimuth ${degrees(azimuth)}, elevation ${degrees(elevation)}`;
}
