// Takes the pictures of the README from a running demo: `npm start`, wait until a proposal is there, then
// `npm run screenshots [folder] [address]`.
import { chromium } from 'playwright-core';
import { mkdirSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';

const folder = process.argv[2] ?? fileURLToPath(new URL('../ui/docs', import.meta.url));
const address = process.argv[3] ?? 'http://localhost:4600';
const every = process.env.EVERY === '1';
mkdirSync(folder, { recursive: true });

const CHROMIUM = {
  executablePath: process.env.CHROMIUM ?? '/usr/bin/chromium',
  headless: true,
  args: [
    '--no-sandbox',
    '--disable-gpu',
    '--disable-quic',
    '--no-first-run',
    '--disable-background-networking',
    '--disable-component-update',
    '--disable-sync',
  ],
};

const browser = await chromium.launch(CHROMIUM);
const context = await browser.newContext();
const page = await context.newPage();
const problems = [];
page.on(
  'console',
  (message) => message.type() === 'error' && problems.push(`${page.url()}: ${message.text()}`),
);
page.on('pageerror', (error) => problems.push(`${page.url()}: ${error.message}`));
await page.goto(`${address}/sign-in`);
await page.getByLabel('Mail address').fill(process.env.AS ?? 'engineer@tarnwick.example');
await page.getByLabel('Password', { exact: true }).fill('polewright-demo');
await page.getByRole('button', { name: 'Sign in', exact: true }).click();
await page.getByRole('heading', { name: 'Fleet' }).waitFor();
// The axis and the proposal that have most to show: the ones that the demo drifts by load.
const tile = page
  .locator('article')
  .filter({ has: page.locator('a[href^="/proposals/"]') })
  .first();
await tile.waitFor({ timeout: 240_000 });
const proposal = await tile.locator('a[href^="/proposals/"]').getAttribute('href');
const axis = await tile.locator('a[href^="/axes/"]').getAttribute('href');

const sizes = { phone: 360, hand: 390, desk: 1280, wall: 2560 };
const shots = every
  ? [
      '/',
      axis,
      `${axis}/bench`,
      '/alerts',
      '/proposals',
      proposal,
      '/rota',
      '/admin/mail',
      '/admin/people',
    ].flatMap((path) =>
      ['phone', 'desk', 'wall'].flatMap((size) =>
        ['light', 'dark'].map((scheme) => ({ path, size, scheme })),
      ),
    )
  : [
      { path: '/', size: 'desk', scheme: 'light' },
      { path: '/', size: 'desk', scheme: 'dark' },
      { path: axis, size: 'desk', scheme: 'light' },
      { path: '/alerts', size: 'hand', scheme: 'light' },
      { path: proposal, size: 'desk', scheme: 'light' },
    ];
for (const { path, size, scheme } of shots) {
  await page.setViewportSize({ width: sizes[size], height: size === 'phone' || size === 'hand' ? 844 : 900 });
  await page.emulateMedia({ colorScheme: scheme });
  await page.goto(`${address}${path}`);
  await page.locator('h1').first().waitFor();
  await page.waitForTimeout(path === axis ? 6_000 : 2_500);
  const name = `${
    path === '/'
      ? 'fleet'
      : path
          .split('/')
          .filter(Boolean)
          .filter((part) => Number.isNaN(Number(part)))
          .join('-')
  }-${size}-${scheme}.png`;
  const whole = path === proposal || path === axis || every;
  await page.screenshot({ path: join(folder, name), fullPage: whole });
  const wide = await page.evaluate(
    () => document.documentElement.scrollWidth - document.documentElement.clientWidth,
  );
  if (wide > 0) problems.push(`${name}: ${wide} px wider than the window`);
}
await browser.close();
for (const problem of problems) console.log(problem);
console.log(`${shots.length} pictures, ${problems.length} problems`);
