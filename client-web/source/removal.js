// What is removed from each frame, between the text of a question and the boxes of the form.

/** @typedef {{piston: boolean, tilt: boolean, mean: boolean, focus: boolean, modes: ?number}} Removal */

const names = ['piston', 'tilt', 'mean', 'focus'];

/**
 * Boxes of a text such as "piston,tilt,mean" or "modes:10,mean"; null when it holds something else.
 *
 * @returns {?Removal}
 */
export function parseRemoval(text) {
  const removal = { piston: false, tilt: false, mean: false, focus: false, modes: null };
  if (text === 'none') return removal;
  for (const part of text.split(',')) {
    const modes = /^modes:(\d{1,3})$/.exec(part);
    if (modes) removal.modes = Number(modes[1]);
    else if (names.includes(part)) removal[part] = true;
    else return null;
  }
  return removal;
}

/** Text of the boxes; "none" when nothing is ticked. @param {Removal} removal */
export function formatRemoval(removal) {
  const parts = names.filter((name) => removal[name]);
  if (removal.modes) parts.push(`modes:${removal.modes}`);
  return parts.length ? parts.join(',') : 'none';
}

/** The same for people: "piston, tilt and steady lensing removed". */
export function removalText(text) {
  const words = text.split(',').map((part) => {
    if (part === 'mean') return 'steady lensing';
    const modes = /^modes:(\d+)$/.exec(part);
    return modes ? `the first ${modes[1]} modes` : part;
  });
  if (text === 'none') return 'nothing removed';
  const last = words.pop();
  return `${words.length ? `${words.join(', ')} and ` : ''}${last} removed`;
}
