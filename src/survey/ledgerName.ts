/** Name of the ledger that is kept in the folder of a run. */
export const LEDGER_NAME = 'settlemark.ledger';
