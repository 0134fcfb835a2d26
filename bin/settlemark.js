#!/usr/bin/env node
// The process around the program: waits for the exit code, flushes, leaves.

let main;
let failure;
try {
  ({ main } = await import('../dist/cli/main.js'));
  failure = await import('../dist/cli/failure.js');
} catch (error) {
  if (error?.code !== 'ERR_MODULE_NOT_FOUND') throw error;
  const missing = /dist\/cli/.test(error.message)
    ? 'it has not been built'
    : 'a package is missing';
  process.stderr.write(`settlemark cannot start: ${missing}. Run "npm install" in its folder.\n`);
}

const leave = async (code) => {
  // A pipe takes its time; what was written must be out before the process ends.
  const flushed = (stream) =>
    stream.writableLength === 0 || stream.destroyed
      ? Promise.resolve()
      : new Promise((resolve) => stream.write('', resolve));
  await Promise.all([flushed(process.stdout), flushed(process.stderr)]);
  process.exit(code);
};

if (main === undefined) {
  await leave(5);
} else {
  process.on('uncaughtException', (error) => {
    process.stderr.write(`${failure.bugText(error)}\n`);
    void leave(5);
  });
  await leave(await main(process.argv.slice(2)));
}
