// A browser without a network beyond this machine, and pages in it that complain about every error.

import { chromium } from 'playwright-core';

const flags = [
  '--no-sandbox',
  '--disable-gpu',
  '--disable-quic',
  '--no-first-run',
  '--disable-background-networking',
  '--disable-component-update',
  '--disable-sync',
];

export const launch = () =>
  chromium.launch({ executablePath: process.env.CHROMIUM ?? '/usr/bin/chromium', args: flags });

/**
 * A page whose errors, policy violations included, and requests to elsewhere are collected in `complaints`.
 *
 * @param {import('playwright-core').Browser} browser
 */
export async function openPage(browser, options = {}) {
  const context = await browser.newContext({ acceptDownloads: true, reducedMotion: 'reduce', ...options });
  const page = await context.newPage();
  const complaints = [];
  page.on('pageerror', (error) => complaints.push(error.message));
  page.on('console', (message) => message.type() === 'error' && complaints.push(message.text()));
  await context.route('**/*', (route) => {
    const { protocol, hostname } = new URL(route.request().url());
    if (protocol === 'data:' || protocol === 'blob:' || hostname === '127.0.0.1') return route.continue();
    complaints.push(`outside: ${route.request().url()}`);
    return route.abort();
  });
  return { context, page, complaints };
}

/** Waits until nothing is being asked or drawn any more. */
export async function settled(page) {
  await page.waitForFunction(() => document.querySelector('.panel') && !document.body.dataset.busy);
  // What the answers changed is drawn with the next frame.
  await page.evaluate(() => new Promise((resolve) => requestAnimationFrame(() => requestAnimationFrame(resolve))));
}
