/** Runs the built program as a user does: a child process. */
import { spawn, type ChildProcess } from 'node:child_process';
import { fileURLToPath } from 'node:url';

export const BIN = fileURLToPath(new URL('../../bin/settlemark.js', import.meta.url));
export const ROOT = fileURLToPath(new URL('../../', import.meta.url));

export interface Outcome {
  readonly code: number | null;
  readonly signal: NodeJS.Signals | null;
  readonly out: string;
  readonly err: string;
}

/** @param meanwhile - may signal the child or close its pipes */
export function settlemark(
  argv: readonly string[],
  meanwhile: (child: ChildProcess) => void = () => undefined,
  cwd = ROOT,
): Promise<Outcome> {
  const env: NodeJS.ProcessEnv = { ...process.env, SETTLEMARK_DEBUG: '' };
  const child = spawn(process.execPath, [BIN, ...argv], { cwd, env });
  let out = '';
  let err = '';
  child.stdout.setEncoding('utf8').on('data', (text: string) => (out += text));
  child.stderr.setEncoding('utf8').on('data', (text: string) => (err += text));
  child.stdin.end();
  meanwhile(child);
  return new Promise((resolve, reject) => {
    child.on('error', reject);
    child.on('close', (code, signal) => resolve({ code, signal, out, err }));
  });
}
