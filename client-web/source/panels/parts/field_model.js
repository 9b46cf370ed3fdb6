// From a field-of-regard result to what the map draws.

import { countText, intervalText } from '../../numbers.js';
import { sequential } from '../../plots/colour_maps.js';
import { tightLimits } from '../../plots/scales.js';
import { angleText } from '../../quantities.js';
import { quantityText, unitText } from '../../units.js';
import { formatState, withView } from '../../view_state.js';

/** What a view's value reads as, with its interval when there is one. */
export function readingText(value, low, high, unit) {
  if (value === null) return 'no value';
  const text = intervalText({ value, low, high });
  const bare = quantityText(text.value, unit);
  return text.low === null || low === null ? bare : `${bare} (${text.low} to ${text.high})`;
}

/**
 * @param {import('../../api.js').Result} result
 * @param {{state: import('../../view_state.js').ViewState, checks: Map<string, object[]>}} given  checks by view
 * @returns {import('../../plots/field_map.js').FieldModel & {unit: string}}
 */
export function fieldModel(result, { state, checks }) {
  const { azimuth, elevation, value, low, high } = result.arrays;
  const ids = result.provenance.views.map((view) => view.id ?? view);
  const unit = value.unit;
  const views = ids
    .map((id, i) => {
      const flaws = (checks.get(id) ?? []).filter(({ severity }) => severity !== 'info' && severity !== 'note');
      const place = angleText({ azimuth_deg: azimuth.data[i], elevation_deg: elevation.data[i] });
      const reading = readingText(value.data[i], low?.data[i] ?? null, high?.data[i] ?? null, unit);
      return {
        id,
        azimuth: azimuth.data[i],
        elevation: elevation.data[i],
        value: value.data[i],
        text: `${place}: ${reading}${flaws.length ? `; ${countText(flaws.length, 'check')} to look at` : ''}`,
        // The same digits as in the name, so that who says what they see is understood.
        short:
          value.data[i] === null
            ? '–'
            : intervalText({ value: value.data[i], low: low?.data[i] ?? null, high: high?.data[i] ?? null }).value,
        href: `?${formatState(withView(state, id))}`,
        isFlawed: flaws.length > 0,
      };
    })
    .filter((view) => view.azimuth !== null && view.elevation !== null);
  const [least, greatest] = state.field_limits ?? tightLimits(value.data);
  return { views, map: sequential, low: least, high: greatest, barTitle: unitText(unit), unit };
}
