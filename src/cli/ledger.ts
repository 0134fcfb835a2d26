/** Which ledger a command keeps, and what it says about it. */
import { access, constants } from 'node:fs/promises';
import { dirname, join } from 'node:path';
import { LEDGER_NAME, openLedger, type Ledger, type Remark } from '../index.ts';

export interface LedgerOptions {
  /** A file; false for none; true, commander's word for neither, for one in the folder of the run. */
  readonly ledger?: string | boolean;
}

/**
 * The ledger that was named, or the one in the folder of the snapshots if they lie in one folder.
 * @returns null for none; with a remark if there could be none
 * @throws InputError of `openLedger`
 */
export async function ledgerFor(
  files: readonly string[],
  { ledger }: LedgerOptions,
): Promise<{ readonly ledger: Ledger | null; readonly remarks: readonly Remark[] }> {
  if (ledger === false) return { ledger: null, remarks: [] };
  if (typeof ledger === 'string') return { ledger: await openLedger(ledger), remarks: [] };
  const folders = new Set(files.map((file) => (file === '-' ? '-' : dirname(file))));
  const [folder] = folders;
  if (folders.size !== 1 || folder === '-') return { ledger: null, remarks: [] };
  const path = join(folder, LEDGER_NAME);
  try {
    await access(folder, constants.W_OK);
  } catch {
    const remark: Remark = {
      code: 'ledgerNotKept',
      text: `records are not kept: ${folder} may not be written to`,
      remedy: 'name a file for them with --ledger, so that the next call measures only what is new',
    };
    const known = await access(path, constants.R_OK).then(
      () => openLedger(path),
      () => null,
    );
    return { ledger: known, remarks: known === null ? [remark] : [] };
  }
  return { ledger: await openLedger(path), remarks: [] };
}
