// The picture at the opening: plane wavefronts whose rays are bent on their way. An ornament, drawn once.

import { svg, toElement } from '../../plots/svg_tree.js';

const rays = 13,
  width = 560,
  height = 120;

/** A ray's height along its way: straight, then turned by what it meets. */
function rayPath(k) {
  const start = 14 + (k * (height - 28)) / (rays - 1);
  const points = [];
  for (let x = 0; x <= width; x += 8) {
    const met = 1 / (1 + Math.exp(-(x - 0.46 * width) / 26));
    const bend = 15 * Math.sin(0.9 * k + 0.4) + 9 * Math.sin(2.3 * k);
    points.push(`${x} ${(start + met * bend * ((x - 0.4 * width) / width)).toFixed(1)}`);
  }
  return `M${points.join('L')}`;
}

/** Where a wavefront stands after `distance`: flat before, wrinkled behind. */
function frontPath(distance) {
  const points = [];
  for (let y = 8; y <= height - 8; y += 4) {
    const met = 1 / (1 + Math.exp(-(distance - 0.46 * width) / 26));
    const wrinkle = met * (5.5 * Math.sin(y / 9 + 1) + 4 * Math.sin(y / 4.7));
    points.push(`${(distance + wrinkle).toFixed(1)} ${y}`);
  }
  return `M${points.join('L')}`;
}

export function raysPicture() {
  return toElement(
    svg(
      'svg',
      { class: 'rays', viewBox: `0 0 ${width} ${height}`, 'aria-hidden': 'true', fill: 'none' },
      Array.from({ length: rays }, (_, k) => svg('path', { class: 'ray', d: rayPath(k) })),
      [0.12, 0.25, 0.38, 0.52, 0.66, 0.8].map((share, i) =>
        svg('path', { class: `front front-${i}`, d: frontPath(share * width) }),
      ),
    ),
  );
}
