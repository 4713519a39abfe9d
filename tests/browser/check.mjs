// Looks at a report in a real browser: node check.mjs report.html [folder for pictures]
//
// What is asked: nothing on the console, no request but for the page itself, no violation of the
// WCAG 2.2 rules that axe-core knows (A and AA), no sideways scroll at 360 and 320 px (WCAG 2.2,
// 1.4.10), the same in the dark, and on paper everything inside the page.
// CHROMIUM names the browser, /usr/bin/chromium without it.

import { mkdirSync } from 'node:fs';
import { readFile } from 'node:fs/promises';
import { createRequire } from 'node:module';
import { resolve } from 'node:path';
import { pathToFileURL } from 'node:url';
import { chromium } from 'playwright-core';

const [report, pictures] = process.argv.slice(2);
if (!report) {
  console.error('usage: node check.mjs report.html [folder for pictures]');
  process.exit(2);
}
const address = pathToFileURL(resolve(report)).href;
const axe = await readFile(createRequire(import.meta.url).resolve('axe-core/axe.min.js'), 'utf8');
if (pictures) mkdirSync(pictures, { recursive: true });

const faults = [];
let checks = 0;
function check(what, found) {
  checks += 1;
  if (found.length > 0) faults.push(`${what}:\n    ${found.slice(0, 12).join('\n    ')}`);
}

const browser = await chromium.launch({
  executablePath: process.env.CHROMIUM ?? '/usr/bin/chromium',
  args: ['--no-sandbox', '--disable-gpu', '--no-first-run', '--disable-sync',
    '--disable-background-networking', '--disable-component-update'],
});

// Opens the report, looks, and gives what was wrong on the way.
async function look(name, { width, height = 900, dark = false, print = false }, inspect) {
  const context = await browser.newContext({
    viewport: { width, height },
    colorScheme: dark ? 'dark' : 'light',
    offline: true,
    bypassCSP: true, // or axe could not be put into the page
  });
  const page = await context.newPage();
  const said = [];
  const asked = [];
  page.on('console', (it) => said.push(`${it.type()}: ${it.text()}`));
  page.on('pageerror', (it) => said.push(String(it)));
  page.on('request', (it) => {
    if (it.url() !== address && !it.url().startsWith('data:')) asked.push(it.url());
  });
  await page.goto(address, { waitUntil: 'load' });
  if (print) await page.emulateMedia({ media: 'print', colorScheme: 'light' });
  await inspect(page, name);
  check(`${name}: the console stays empty`, said);
  check(`${name}: nothing is fetched`, asked);
  if (pictures) await page.screenshot({ path: `${pictures}/${name}.png`, fullPage: true });
  await context.close();
}

async function accessible(page, name) {
  await page.evaluate(() => document.querySelectorAll('details').forEach((it) => { it.open = true; }));
  await page.evaluate(axe);
  const found = await page.evaluate(() => globalThis.axe.run(document, {
    runOnly: ['wcag2a', 'wcag2aa', 'wcag21a', 'wcag21aa', 'wcag22aa', 'best-practice'],
  }));
  if (found.passes.length < 15) faults.push(`${name}: axe-core ran ${found.passes.length} rules only`);
  check(`${name}: accessible`, found.violations.flatMap((rule) =>
    rule.nodes.slice(0, 3).map((it) => `${rule.id}: ${it.html.slice(0, 160)}`)));
  await page.evaluate(() => document.querySelectorAll('details').forEach((it) => { it.open = false; }));
}

// What reaches beyond the right edge, the insides of scrolling boxes apart.
async function fits(page, name) {
  const found = await page.evaluate(() => {
    const edge = document.documentElement.clientWidth;
    const out = [];
    if (document.documentElement.scrollWidth > edge) {
      out.push(`the page is ${document.documentElement.scrollWidth} px wide, the window ${edge}`);
    }
    return out;
  });
  check(`${name}: no sideways scroll`, found);
}

// On paper nothing scrolls: each table, figure and text must be inside the page by itself.
async function inside(page, name) {
  const found = await page.evaluate(() => {
    const edge = document.documentElement.clientWidth + 1;
    const out = [];
    for (const it of document.querySelectorAll('table, svg, p, li, dl, pre')) {
      const box = it.getBoundingClientRect();
      const drawn = box.width > 0 && box.height > 0 && getComputedStyle(it).visibility !== 'hidden';
      if (drawn && (box.right > edge || it.scrollWidth > it.clientWidth + 1 && it.tagName !== 'svg'
          && getComputedStyle(it).overflowX !== 'visible')) {
        const name = it.querySelector('caption')?.textContent ?? it.textContent.trim().slice(0, 60);
        out.push(`${it.tagName.toLowerCase()} ends at ${Math.round(box.right)} of ${edge} px: ${name}`);
      }
    }
    for (const it of document.querySelectorAll('.scroll')) {
      if (it.scrollHeight > it.clientHeight + 1 && getComputedStyle(it).overflowY !== 'visible') {
        out.push(`cut at the bottom: ${it.getAttribute('aria-label')}`);
      }
    }
    for (const it of document.querySelectorAll('figure svg')) {
      const [own, around] = [it, it.closest('figure')].map((it) => it.getBoundingClientRect());
      if (own.width > 0 && own.right > around.right + 1) {
        out.push(`drawn over its neighbour: ${it.closest('figure').id}`);
      }
    }
    return out;
  });
  check(`${name}: all of it is on the page`, found);
  const tables = await page.evaluate(() =>
    [...document.querySelectorAll('table')].filter((it) => it.getBoundingClientRect().height > 0).length);
  if (tables === 0) faults.push(`${name}: no table is printed`);
}

// Each figure says what it is and what it shows, and has its numbers behind it.
async function figures(page, name) {
  const found = await page.evaluate(() => {
    const out = [];
    const all = [...document.querySelectorAll('figure')];
    if (all.length < 5) out.push(`only ${all.length} figures`);
    for (const it of all) {
      const label = it.querySelector('figcaption')?.textContent.slice(0, 50) ?? it.id;
      for (const svg of it.querySelectorAll('svg[role=img]')) {
        const ids = (svg.getAttribute('aria-labelledby') ?? '').split(' ').filter(Boolean);
        if (ids.length < 2 || ids.some((id) => !document.getElementById(id)?.textContent.trim())) {
          out.push(`no title and description: ${label}`);
        }
      }
      if (!it.querySelector('svg[role=img]')) out.push(`no picture: ${label}`);
      if (!it.querySelector('table') && !it.parentElement.querySelector('table')) {
        out.push(`no numbers behind it: ${label}`);
      }
    }
    return out;
  });
  check(`${name}: figures explain themselves`, found);
}

await look('wide', { width: 1280 }, async (page, name) => {
  await figures(page, name);
  await accessible(page, name);
  await fits(page, name);
  const pdf = await page.pdf({ format: 'A4', preferCSSPageSize: true });
  check(`${name}: a PDF is made`, pdf.length > 20000 && pdf.subarray(0, 5).toString() === '%PDF-'
    ? [] : [`${pdf.length} bytes`]);
});
await look('dark', { width: 1280, dark: true }, async (page, name) => {
  await accessible(page, name);
  const ground = await page.evaluate(() => getComputedStyle(document.body).backgroundColor);
  const [r, g, b] = ground.match(/\d+/g).map(Number);
  check(`${name}: the ground is dark`, Math.max(r, g, b) < 80 ? [] : [ground]);
});
await look('phone', { width: 360, height: 800 }, async (page, name) => {
  await accessible(page, name);
  await fits(page, name);
});
await look('narrow', { width: 320, height: 700 }, fits);
// A4 and Letter inside the margins of the style sheet, at 96 px an inch.
await look('a4', { width: Math.floor((210 - 28) / 25.4 * 96), print: true }, inside);
await look('letter', { width: Math.floor((8.5 * 25.4 - 28) / 25.4 * 96), print: true }, inside);
await browser.close();

if (faults.length > 0) {
  console.error(`${report}: ${faults.length} of ${checks} checks failed\n  ${faults.join('\n  ')}`);
  process.exit(1);
}
console.log(`${report}: ${checks} checks passed in a browser`);
