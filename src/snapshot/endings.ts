/** Which format of snapshots the ending of a name means. */

export const ARROW_ENDINGS = ['.arrow', '.arrows', '.feather', '.ipc'] as const;
export const RAW_ENDINGS = ['.bin', '.raw', '.dat'] as const;

/** Null if the ending says nothing. */
export function formatByEnding(path: string): 'raw' | 'arrow' | null {
  const name = path.toLowerCase();
  if (ARROW_ENDINGS.some((ending) => name.endsWith(ending))) return 'arrow';
  return RAW_ENDINGS.some((ending) => name.endsWith(ending)) ? 'raw' : null;
}
