// SPDX-License-Identifier: GPL-3.0-or-later
// Where the packages of package.json are: LEEWAY_NODE_MODULES (tests/run sets it), else
// node_modules beside this file. They are never part of the checkout.
import { existsSync } from 'node:fs';
import { createRequire } from 'node:module';
import { dirname, join } from 'node:path';
import { fileURLToPath } from 'node:url';

export const here = dirname(fileURLToPath(import.meta.url));
export const root = join(here, '..', '..');
export const modules = process.env.LEEWAY_NODE_MODULES || join(here, 'node_modules');

if (!existsSync(join(modules, 'ajv', 'package.json'))) {
  console.error(`There are no packages in ${modules}. Run "tests/run openapi", or: npm --prefix `
    + 'tests/openapi ci; or set LEEWAY_NODE_MODULES.');
  process.exit(2);
}
export const require = createRequire(join(modules, 'here.js'));
