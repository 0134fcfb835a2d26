// Writes what in docs/ is made from the code: the JSON Schemas and the table of quantities.
// Run by "npm run schemas", which builds dist/ first.
import { readFile, writeFile } from 'node:fs/promises';
import { quantityTable } from '../dist/dynamics/registryText.js';
import { recordJsonSchema } from '../dist/dynamics/schema.js';
import { rulesJsonSchema } from '../dist/gate/rulesSchema.js';
import { layoutJsonSchema } from '../dist/snapshot/raw/layout.js';
import { runFileJsonSchema } from '../dist/survey/runFileSchema.js';

const at = (name) => new URL(name, import.meta.url);
const asFile = (schema) => `${JSON.stringify(schema, null, 2)}\n`;

await writeFile(at('layout.schema.json'), asFile(layoutJsonSchema()));
await writeFile(at('run.schema.json'), asFile(runFileJsonSchema()));
await writeFile(at('rules.schema.json'), asFile(rulesJsonSchema()));
await writeFile(at('record.schema.json'), asFile(await recordJsonSchema()));

const BEGIN = '<!-- quantities: made by npm run schemas -->';
const END = '<!-- end of quantities -->';
const page = await readFile(at('record.md'), 'utf8');
const [before, rest] = page.split(BEGIN);
const after = rest?.split(END)[1];
if (after === undefined) throw new Error(`docs/record.md lacks the lines ${BEGIN} and ${END}`);
await writeFile(at('record.md'), `${before}${BEGIN}\n\n${quantityTable()}\n\n${END}${after}`);
