// SPDX-License-Identifier: Apache-2.0
// report.html in Chromium: under a CI server's content policy, without its
// stylesheet, as a local file, in dark mode, on a small screen and on paper:
// everything is there, nothing overlaps or is cut, and axe-core finds nothing.
import { readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { pathToFileURL } from 'node:url';
import { boxFaults, check, finish, inventory, launch, modules, open, rehearsed, sample, scratch, serve } from './browser.mjs';

const axe = readFileSync(modules.resolve('axe-core/axe.min.js'), 'utf8');

async function boxes(page, what) {
  const faults = await page.evaluate(boxFaults);
  check(faults.length === 0, `${what}: ${faults.length} faults: ${faults.slice(0, 12).join('; ')}`);
}

async function accessible(page, what) {
  await page.evaluate(axe);
  const result = await page.evaluate(() => window.axe.run({ preload: false }));
  for (const one of result.violations) {
    check(false, `${what}: axe ${one.id}: ${one.help}: ${one.nodes.slice(0, 3).map((node) => node.html.slice(0, 160)).join(' | ')}`);
  }
  check(result.passes.length > 5, `${what}: axe has looked at something`);
}

async function same(page, expected, what) {
  const found = await page.evaluate(inventory);
  check(JSON.stringify(found.headings) === JSON.stringify(expected.headings) && found.tests === expected.tests &&
    found.drawings === expected.drawings && found.tables === expected.tables, `${what}: everything is there`);
}

async function look(browser, folder, name) {
  const file = pathToFileURL(join(folder, 'report.html')).href;
  const local = await open(browser, file, `${name} as a file`);
  const whole = await local.evaluate(inventory);
  const results = JSON.parse(readFileSync(join(folder, 'results.json'), 'utf8'));
  const tests = results.suites.reduce((sum, suite) => sum + suite.tests.length, 0);
  check(whole.heading.startsWith(`Verdict: ${results.verdict}`), `${name}: the verdict stands first`);
  check(whole.tests === tests, `${name}: a section for each of ${tests} tests`);
  check(whole.drawings > 0, `${name}: drawings`);
  check(new Set(whole.ids).size === whole.ids.length, `${name}: no id twice`);
  check(whole.targets.every((id) => whole.ids.includes(id)), `${name}: every link has its target`);
  for (const heading of ['What to know before the good news', 'What was run', 'All tests', 'Requirements', 'Each test']) {
    check(whole.headings.includes(heading), `${name}: section ${heading}`);
  }
  await boxes(local, `${name} as a file`);
  await accessible(local, `${name} in light colours`);
  await local.setViewportSize({ width: 390, height: 800 });
  await boxes(local, `${name} on a small screen`);
  await local.close();

  const dark = await open(browser, file, `${name} in dark mode`, { colorScheme: 'dark' });
  await boxes(dark, `${name} in dark mode`);
  await accessible(dark, `${name} in dark colours`);
  await dark.close();

  for (const css of [true, false]) {
    const what = `${name} under the policy${css ? '' : ', without the stylesheet'}`;
    const server = await serve(folder, css);
    const page = await open(browser, `${server.url}/report.html`, what);
    await same(page, whole, what);
    const styled = await page.evaluate(() => getComputedStyle(document.body).maxWidth !== 'none');
    check(styled === css, `${what}: the stylesheet is ${css ? '' : 'not '}there`);
    // Nothing but a stylesheet can break a word of 800 letters: there it may be scrolled to.
    if (css || name !== 'hostile') await boxes(page, what);
    await page.close();
    server.close();
  }

  await paper(browser, file, whole, name);
}

async function paper(browser, file, whole, name) {
  // A4 less the margins of the stylesheet, in CSS pixels of 1/96 inch.
  const width = Math.floor((210 - 32) / 25.4 * 96), height = (297 - 36) / 25.4 * 96;
  const page = await open(browser, file, `${name} on paper`, { viewport: { width, height: 900 } });
  await page.emulateMedia({ media: 'print' });
  await boxes(page, `${name} on paper`);
  const tall = await page.evaluate((most) => [...document.querySelectorAll('figure')]
    .filter((figure) => figure.getBoundingClientRect().height > most ||
      getComputedStyle(figure).breakInside !== 'avoid').length, height);
  check(tall === 0, `${name} on paper: ${tall} figures may be cut by the end of a page`);
  const sign = await page.evaluate(() => document.querySelector('.signoff')?.getBoundingClientRect().height ?? 0);
  check(sign > 100, `${name} on paper: lines to sign on`);
  const pdf = await page.pdf({ preferCSSPageSize: true });
  writeFileSync(join(scratch, `${name}.pdf`), pdf);
  const text = pdf.toString('latin1');
  const boxesOfPages = [...text.matchAll(/\/MediaBox \[0 0 ([\d.]+) ([\d.]+)\]/g)];
  check(text.startsWith('%PDF') && boxesOfPages.length > 1 &&
    boxesOfPages.every((at) => Math.abs(at[1] - 595) < 2 && Math.abs(at[2] - 842) < 2),
  `${name} on paper: pages of A4`);
  check(whole.drawings > 0, `${name} on paper: drawings`);
  await page.close();
}

const browser = await launch();
try {
  await look(browser, rehearsed('failed', '--defect', 'encoder-offset', join(process.env.SOURCE, 'suites/release.yaml')), 'failed');
  await look(browser, sample('hostile', '<script>alert(1)</script>&"\' \u202edlrow \x07 ' + 'long'.repeat(200)), 'hostile');
} finally {
  await browser.close();
}
finish();
