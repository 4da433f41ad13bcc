// SPDX-License-Identifier: Apache-2.0
// What the tests of this folder share: run folders, a server with the content
// policy that CI servers give to artifacts, a browser, and rules about boxes.
import { execFileSync } from 'node:child_process';
import { createServer } from 'node:http';
import { createRequire } from 'node:module';
import { existsSync, readFileSync } from 'node:fs';
import { join, normalize } from 'node:path';

export const scratch = process.env.SCRATCH;
export const modules = createRequire(join(process.env.MODULES, 'package.json'));
export const POLICY = "sandbox; default-src 'none'; img-src 'self'; style-src 'self'";

let failures = 0;
export function check(condition, what) {
  if (condition) return;
  failures++;
  console.error(`FAILED: ${what}`);
}
export function finish() {
  console.log(failures ? `${failures} failed` : 'everything holds');
  process.exitCode = failures ? 1 : 0;
}

/** A rehearsed run; tests of it may fail, but its reports must be there. */
export function rehearsed(name, ...options) {
  const folder = join(scratch, name);
  try {
    execFileSync(process.env.DRIVETRIAL, ['rehearse', '--quiet', '--rig',
      join(process.env.SOURCE, 'rigs/model-spm.yaml'), '--out', folder, ...options],
    { stdio: 'pipe' });
  } catch (error) {
    if (!existsSync(join(folder, 'report.html'))) throw error;
  }
  return folder;
}

/** A run made by hand, with `text` wherever a text can stand. */
export function sample(name, text) {
  const folder = join(scratch, name);
  execFileSync(process.env.WRITE_SAMPLE_RUN, [folder, text], { stdio: 'pipe' });
  return folder;
}

/** Serves a folder from a free port of the loopback; css false: an empty stylesheet. */
export async function serve(folder, css = true) {
  const server = createServer((request, response) => {
    const name = normalize(decodeURIComponent(request.url.split('?')[0])).slice(1);
    const type = name.endsWith('.css') ? 'text/css' : name.endsWith('.html') ? 'text/html' : null;
    if (!type || name.includes('..') || !existsSync(join(folder, name))) {
      // A browser asks for an icon by itself; that is no error of the page.
      response.writeHead(name === 'favicon.ico' ? 204 : 404).end();
      return;
    }
    response.writeHead(200, {
      'Content-Type': `${type}; charset=utf-8`,
      'Content-Security-Policy': POLICY,
      'X-Content-Type-Options': 'nosniff',
    });
    response.end(type === 'text/css' && !css ? '' : readFileSync(join(folder, name)));
  });
  await new Promise((resolve) => server.listen(0, '127.0.0.1', resolve));
  return { url: `http://127.0.0.1:${server.address().port}`, close: () => server.close() };
}

export async function launch() {
  const { chromium } = modules('playwright-core');
  return chromium.launch({ executablePath: '/usr/bin/chromium', args: ['--no-sandbox'] });
}

/** A page whose console errors and failed requests are failures. */
export async function open(browser, url, what, options = {}) {
  const page = await browser.newPage({ viewport: { width: 1100, height: 900 }, ...options });
  page.on('console', (message) => check(!['error', 'warning'].includes(message.type()),
    `${what}: the console says: ${message.text()}`));
  page.on('pageerror', (error) => check(false, `${what}: ${error}`));
  page.on('requestfailed', (request) => check(false, `${what}: ${request.url()} was not loaded`));
  await page.goto(url, { waitUntil: 'load' });
  return page;
}

/** Runs in the page: everything that overlaps, is cut, or is wider than its place. */
export function boxFaults() {
  const faults = [];
  const box = (element) => element.getBoundingClientRect();
  const name = (element) => `${element.tagName.toLowerCase()} "${element.textContent.trim().slice(0, 60)}"`;
  const seen = (rect) => rect.width > 0 && rect.height > 0;
  const root = document.documentElement;
  if (root.scrollWidth > root.clientWidth + 1) {
    faults.push(`the page is ${root.scrollWidth} wide and shows ${root.clientWidth}`);
  }
  // Blocks stand below each other.
  for (const parent of document.querySelectorAll('body, header, main, section, article, ul, ol, tbody, figure')) {
    let last = null;
    for (const child of parent.children) {
      if (!seen(box(child)) || getComputedStyle(child).display.startsWith('inline')) continue;
      if (last && box(child).top < box(last).bottom - 1) faults.push(`${name(child)} overlaps ${name(last)}`);
      last = child;
    }
  }
  // Cells stand beside each other and show their text whole.
  for (const row of document.querySelectorAll('tr')) {
    let right = -Infinity;
    for (const cell of row.children) {
      if (!seen(box(cell))) continue;
      if (box(cell).left < right - 1) faults.push(`${name(cell)} overlaps the cell before it`);
      if (cell.scrollWidth > cell.clientWidth + 1) faults.push(`${name(cell)} is cut`);
      right = box(cell).right;
    }
  }
  for (const element of document.querySelectorAll('p, li, h1, h2, h3, h4, dd, dt, figcaption')) {
    if (seen(box(element)) && box(element).right > root.clientWidth + 1) faults.push(`${name(element)} runs out of the page`);
  }
  // Texts of a drawing stay inside it and do not cover each other.
  for (const svg of document.querySelectorAll('svg')) {
    const outer = box(svg), title = svg.querySelector('title')?.textContent ?? svg.getAttribute('aria-label');
    if (outer.width < 60 || outer.height < 20) faults.push(`drawing "${title}" is ${outer.width} by ${outer.height}`);
    const texts = [...svg.querySelectorAll('text')].map((text) => [text, box(text)]);
    texts.forEach(([text, rect], i) => {
      if (rect.left < outer.left - 1 || rect.right > outer.right + 1 || rect.top < outer.top - 1 || rect.bottom > outer.bottom + 1) {
        faults.push(`"${text.textContent}" leaves drawing "${title}"`);
      }
      for (const [other, rect2] of texts.slice(i + 1)) {
        const width = Math.min(rect.right, rect2.right) - Math.max(rect.left, rect2.left);
        const height = Math.min(rect.bottom, rect2.bottom) - Math.max(rect.top, rect2.top);
        // Letters do not fill their line: a quarter of a line's height is none of them.
        if (width > 1.5 && height > 0.35 * Math.min(rect.height, rect2.height)) {
          faults.push(`"${text.textContent}" covers "${other.textContent}" in drawing "${title}"`);
        }
      }
    });
  }
  return faults;
}

/** Runs in the page: what a report must hold. */
export function inventory() {
  const count = (selector) => document.querySelectorAll(selector).length;
  return {
    title: document.title,
    heading: document.querySelector('h1')?.textContent ?? '',
    headings: [...document.querySelectorAll('h2')].map((heading) => heading.textContent),
    tests: count('section.test'), drawings: count('svg'), tables: count('table'),
    text: document.body.innerText.length,
    ids: [...document.querySelectorAll('[id]')].map((element) => element.id),
    targets: [...document.querySelectorAll('a[href^="#"]')].map((link) => link.getAttribute('href').slice(1)),
  };
}
