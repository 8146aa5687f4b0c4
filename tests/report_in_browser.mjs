// The report as a person uses it, in a real browser: droplets chosen, footage played and stepped, nothing asked for outside,
// and what an accessibility checker says of it.
//   node report_in_browser.mjs REPORT BROWSER MODULES
import { createRequire } from 'node:module';
import { readFileSync } from 'node:fs';

const [, , report, executablePath, modules] = process.argv;
const { chromium } = createRequire(modules + '/')('playwright-core');
const axe = readFileSync(modules + '/node_modules/axe-core/axe.min.js', 'utf8');
let failures = 0;

function check(isWell, what) {
  console.log(`${isWell ? 'ok' : 'not ok'}: ${what}`);
  if (!isWell) failures++;
}

const browser = await chromium.launch({ executablePath, args: ['--no-sandbox', '--disable-gpu'] });

async function open(width, height, colorScheme) {
  // The checker is put into the page as a script, which the page's own policy rightly forbids.
  const context = await browser.newContext({ viewport: { width, height }, colorScheme, bypassCSP: colorScheme === 'dark' });
  const page = await context.newPage();
  const complaints = [], requests = [];
  page.on('console', message => complaints.push(message.text()));
  page.on('pageerror', error => complaints.push(error.message));
  page.on('request', request => { if (!/^(data|blob):/.test(request.url())) requests.push(request.url()); });
  await page.goto('file://' + report);
  return { page, complaints, requests };
}

const shown = page => page.locator('#player').getAttribute('data-shown').then(Number);
async function shows(page, frame) {
  await page.waitForFunction(n => document.querySelector('#player').dataset.shown === String(n), frame, { timeout: 20000 })
    .catch(() => {});
  return await shown(page) === frame;
}

{
  const { page, complaints, requests } = await open(1280, 800, 'light');
  check(await page.locator('#player').isHidden(), 'no player before anything is chosen');
  await page.locator('#droplets a.pick', { hasText: /^4$/ }).first().click();
  const marked = await page.locator('[data-droplet="4"]:not(.is-chosen)').count();
  check(marked === 0, 'a droplet chosen in the table is marked everywhere');
  check(await page.locator('#player').isVisible(), 'and its footage opens');
  await page.waitForFunction(() => document.querySelector('#player').dataset.shown > 3, null, { timeout: 20000 }).catch(() => {});
  check(await shown(page) > 3, 'and plays');
  check(await page.locator('#player .paths use').count() === 1, 'with its path over it');
  check(await page.locator('#player .ring').isVisible(), 'and a ring around it');

  const film = JSON.parse(await page.locator('#film-data').textContent());
  const moment = film.moments[0];
  await page.locator('#events .look').first().click();
  check(await shows(page, moment.at), 'a step opens at its frame');
  check((await page.locator('#player .where').textContent()).startsWith(`frame ${film.frame[moment.at]} `), 'and says which');
  await page.keyboard.press('ArrowRight');
  check(await shows(page, moment.at + 1), 'the right arrow steps one frame on');
  await page.keyboard.press('ArrowLeft');
  await page.keyboard.press('ArrowLeft');
  check(await shows(page, moment.at - 1), 'two left arrows step two frames back');
  await page.getByRole('button', { name: 'Next frame' }).click();
  check(await shows(page, moment.at), 'the button steps one frame on');
  for (let i = 0; i < 12; i++) await page.keyboard.press('ArrowRight');
  check(await shows(page, moment.last), 'stepping ends where the moment ends');
  await page.getByRole('button', { name: 'Close' }).click();
  check(await page.locator('#player').isHidden(), 'the player closes');
  await page.keyboard.press('Escape');
  check(await page.locator('.is-chosen').count() === 0, 'Escape chooses nothing');
  check(complaints.length === 0, `no word on the console${complaints.map(text => ': ' + text)}`);
  check(requests.length === 1, `one request, the page itself (${requests.length})`);
}

for (const [width, height] of [[1280, 800], [390, 844]]) {
  const { page } = await open(width, height, 'dark');
  await page.locator('#events .look').first().click();
  await page.addScriptTag({ content: axe });
  const found = (await page.evaluate(() => globalThis.axe.run())).violations;
  check(found.length === 0, `axe at ${width} px${found.map(one => `: ${one.id} (${one.nodes[0].html.slice(0, 120)})`)}`);
  const isWide = await page.evaluate(() => document.documentElement.scrollWidth > window.innerWidth);
  check(!isWide, `nothing sticks out sideways at ${width} px`);
}

await browser.close();
process.exit(failures ? 1 : 0);
