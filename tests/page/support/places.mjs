// Where things are: the page's sources, the build folder, the program.

import path from 'node:path';
import { fileURLToPath } from 'node:url';

const here = path.dirname(fileURLToPath(import.meta.url));

export const projectFolder = path.resolve(here, '../../..');
export const pageFolder = path.join(projectFolder, 'client-web');
export const buildFolder = path.resolve(process.env.BENTLIGHT_BUILD ?? path.join(projectFolder, 'build'));
export const program = path.join(buildFolder, 'bentlight');
