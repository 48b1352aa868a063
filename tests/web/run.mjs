/* CTest's way in: says why the page cannot be tested here (return code 77: skipped), else runs the
 * tests named on the command line. */

import { spawnSync } from 'node:child_process';
import { whyNot } from './support.mjs';

const why = whyNot();
if (why) {
  console.log(`skipped: ${why}`);
  process.exit(77);
}
const run = spawnSync(process.execPath, ['--test', '--test-concurrency=1', ...process.argv.slice(2)], { stdio: 'inherit' });
process.exit(run.status ?? 1);
