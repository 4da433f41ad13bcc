// SPDX-License-Identifier: Apache-2.0
// junit.xml as other programs read it: each must find every test and tell
// failures, errors and skipped tests apart.
import { execFileSync } from 'node:child_process';
import { copyFileSync, existsSync, readFileSync } from 'node:fs';
import { join } from 'node:path';
import { pathToFileURL } from 'node:url';
import { check, finish, modules, sample, scratch } from './browser.mjs';

const folder = (name) => join(process.env.MODULES, 'node_modules', name);
const main = (name) => {
  const description = JSON.parse(readFileSync(join(folder(name), 'package.json'), 'utf8'));
  const way = description.exports?.['.'];
  return join(folder(name), way?.import?.default ?? way?.import ?? way?.default ?? (typeof way === 'string' ? way : description.main));
};
// 6 tests: 1 fail, 1 inconclusive and 2 errors (errors in the file), 1 skipped.
for (const [name, text] of [['plain', 'an invented text'], ['hostile', '<b>&"\' ]]> \x01 \u202e']]) {
  const run = sample(name, text), junit = join(run, 'junit.xml');
  const { parse } = await import(pathToFileURL(main('junit2json')).href);
  const parsed = await parse(readFileSync(junit, 'utf8'));
  const suite = parsed.testsuite[0];
  check(suite.tests === 6 && suite.testcase.length === 6, `${name}: junit2json finds six tests`);
  check(suite.testcase.filter((test) => test.failure).length === 1 &&
    suite.testcase.filter((test) => test.error).length === 3 &&
    suite.testcase.filter((test) => test.skipped).length === 1, `${name}: junit2json tells them apart`);

  const merged = join(scratch, `${name}-merged.xml`), other = join(scratch, `${name}-other.xml`);
  copyFileSync(junit, other);
  await modules('junit-report-merger').mergeFiles(merged, [junit, other]);
  const both = await parse(readFileSync(merged, 'utf8'));
  // Suites of one name become one.
  check(both.testsuite.length === 1 && both.testsuite[0].testcase.length === 12 && both.testsuite[0].errors === 6,
    `${name}: junit-report-merger keeps every test`);

  const page = join(scratch, `${name}.html`);
  const shown = execFileSync('node', [join(folder('xunit-viewer'), 'bin/xunit-viewer.js'), '-r', junit, '-o', page,
    '--console', '--no-color'], { encoding: 'utf8', cwd: scratch });
  check(existsSync(page) && ['1 failure', '1 passed', '3 error', '1 skipped'].every((count) => shown.includes(count)) &&
    [1, 2, 3, 4, 5, 6].every((number) => shown.includes(`SPD-0${number}`)), `${name}: xunit-viewer shows the tests`);
}
finish();
