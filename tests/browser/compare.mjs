// SPDX-License-Identifier: Apache-2.0
// The page of `compare`, held against the same rules as the report.
import { spawnSync } from 'node:child_process';
import { mkdirSync, readFileSync } from 'node:fs';
import { join } from 'node:path';
import { pathToFileURL } from 'node:url';
import { boxFaults, check, finish, launch, modules, open, rehearsed, scratch, serve } from './browser.mjs';

const axe = readFileSync(modules.resolve('axe-core/axe.min.js'), 'utf8');
const suite = join(process.env.SOURCE, 'suites/smoke.yaml');
const good = rehearsed('good', suite), bad = rehearsed('bad', '--defect', 'overshoot', suite);
const place = join(scratch, 'comparison');
mkdirSync(place);
const compared = (...folders) => spawnSync(process.env.DRIVETRIAL,
  ['compare', ...folders, '--html', join(place, 'compare.html'), '--json', join(place, 'compare.json')],
  { encoding: 'utf8' });

const same = compared(good, good);
check(same.status === 0, `a run against itself: exit ${same.status}: ${same.stderr}`);
const worse = compared(good, good, bad);
check(worse.status === 1, `a run with more overshoot: exit ${worse.status}: ${worse.stderr}`);
const json = JSON.parse(readFileSync(join(place, 'compare.json'), 'utf8'));
check(json.runs.length === 3 && json.metrics.some((metric) => metric.worse && metric.metric === 'overshoot'),
  'the overshoot is what got worse');

const browser = await launch();
try {
  for (const colorScheme of ['light', 'dark']) {
    const page = await open(browser, pathToFileURL(join(place, 'compare.html')).href, `comparison, ${colorScheme}`, { colorScheme });
    const faults = await page.evaluate(boxFaults);
    check(faults.length === 0, `comparison, ${colorScheme}: ${faults.slice(0, 12).join('; ')}`);
    await page.evaluate(axe);
    const found = await page.evaluate(() => window.axe.run({ preload: false }));
    for (const one of found.violations) check(false, `comparison, ${colorScheme}: axe ${one.id}: ${one.help}: ${one.nodes[0].html.slice(0, 200)}`);
    const drawn = json.metrics.filter((metric) => metric.values.some((value) => value && value.value !== null)).length;
    check(drawn > 0 && await page.locator('svg').count() === drawn, `a small plot for each of ${drawn} metrics with a value`);
    await page.close();
  }
  const server = await serve(place);
  const page = await open(browser, `${server.url}/compare.html`, 'comparison under the policy');
  check((await page.locator('h1').textContent()).includes('worse'), 'its heading says so');
  await page.close();
  server.close();
} finally {
  await browser.close();
}
finish();
