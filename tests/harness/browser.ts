import { accessSync } from 'node:fs'
import { AxeBuilder } from '@axe-core/playwright'
import { chromium, type Browser, type Page } from 'playwright-core'
import { expect } from 'vitest'

const executablePath = '/usr/bin/chromium'

/** Starts Debian's Chromium without a window. Whoever starts it closes it. */
export async function launchBrowser(): Promise<Browser> {
  try {
    accessSync(executablePath)
  } catch {
    throw new Error('Chromium is missing: install Debian’s package with `apt-get install chromium`.')
  }
  return chromium.launch({
    executablePath,
    // As root Chromium has no sandbox; the others keep it from asking hosts that a test machine cannot reach.
    args: [
      '--no-sandbox',
      '--disable-gpu',
      '--disable-quic',
      '--no-first-run',
      '--disable-background-networking',
      '--disable-component-update',
      '--disable-sync',
    ],
  })
}

/** A page that remembers what went wrong in it. */
export interface WatchedPage {
  page: Page
  /** Fails when the console showed an error or a script threw. `allow` names what the test itself provoked. */
  expectNoErrors(allow?: RegExp): void
}

/** Opens a page of its own context (own cookies), so that two of them are two people or two devices. */
export async function openPage(
  browser: Browser,
  baseURL: string,
  options: { width: number; height: number; colorScheme?: 'dark' | 'light'; locale?: string } = {
    width: 1440,
    height: 900,
  },
): Promise<WatchedPage> {
  const context = await browser.newContext({
    baseURL,
    viewport: { width: options.width, height: options.height },
    colorScheme: options.colorScheme ?? 'dark',
    locale: options.locale ?? 'en-US',
  })
  const page = await context.newPage()
  page.setDefaultTimeout(12_000)
  return watch(page)
}

/** Watches a page's console from now on. */
export function watch(page: Page): WatchedPage {
  const errors: string[] = []
  page.on('console', (message) => {
    if (message.type() === 'error' || message.type() === 'warning')
      errors.push(`${message.type()}: ${message.text()}`)
  })
  page.on('pageerror', (error) => errors.push(`thrown: ${error.message}`))
  return {
    page,
    expectNoErrors: (allow) => {
      expect(errors.filter((line) => !allow?.test(line))).toEqual([])
    },
  }
}

/** Fails with each accessibility violation that axe finds on the page as it stands (WCAG 2.2 A and AA, best practice). */
export async function expectAccessible(page: Page, where = page.url()): Promise<void> {
  const { violations } = await new AxeBuilder({ page }).analyze()
  const told = violations.map(
    (violation) =>
      `${violation.id}: ${violation.help} at ${violation.nodes.map((node) => node.target.join(' ')).join(' | ')}`,
  )
  expect(told, where).toEqual([])
}

/** Fails when something sticks out of the page to the side. */
export async function expectNoSidewaysScroll(page: Page, where = page.url()): Promise<void> {
  const [content, frame] = await page.evaluate<[number, number]>(
    '[document.documentElement.scrollWidth, document.documentElement.clientWidth]',
  )
  expect(content, where).toBeLessThanOrEqual(frame)
}
