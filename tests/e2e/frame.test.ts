import type { Browser } from 'playwright-core'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { expectAccessible, launchBrowser, openPage } from '../harness/browser.ts'
import { cuttableProxy } from '../harness/cuttable-proxy.ts'
import { startNight, type Night } from '../harness/night.ts'
import { signIn } from './sign-in.ts'

let night: Night
let browser: Browser

beforeAll(async () => {
  ;[night, browser] = await Promise.all([startNight(), launchBrowser()])
})
afterAll(async () => {
  await browser.close()
  await night.stop()
})

describe('the frame', () => {
  it('runs no code made from text, as its security policy says', async () => {
    const { page } = await openPage(browser, night.url)
    const refused: string[] = []
    page.on('console', (message) => {
      if (message.text().startsWith('refused by policy')) refused.push(message.text())
    })
    await page.addInitScript(`document.addEventListener('securitypolicyviolation', (event) =>
      console.log('refused by policy:', event.violatedDirective, event.blockedURI))`)
    await signIn(page, night.house.people.owner.email, '/quarry-road/tonight')
    await page.locator('canvas').first().waitFor()
    await page.goto('/quarry-road/devices')
    await page.getByText('North box').first().waitFor()
    expect(refused).toEqual([])
  })

  it('draws the picture once its code can be had, when the line was lost just then', async () => {
    const { page } = await openPage(browser, night.url)
    let refused = 0
    await page.route(/LaneCanvas.*\.js/, async (route) => {
      refused += 1
      await (refused <= 2 ? route.abort() : route.continue())
    })
    await signIn(page, night.house.people.owner.email, '/quarry-road/tonight')
    await page.getByText('North Offset').first().waitFor()
    await page.locator('canvas').first().waitFor()
    expect(refused).toBeGreaterThan(2)
  })

  it('gets no frames while nobody sees it, and the state as it is once somebody does', async () => {
    const { page } = await openPage(browser, night.url)
    const heard: string[] = []
    const said: string[] = []
    page.on('websocket', (socket) => {
      socket.on('framereceived', ({ payload }) => heard.push(payload.toString()))
      socket.on('framesent', ({ payload }) => said.push(payload.toString()))
    })
    // Pages without a window are never hidden of themselves.
    await page.addInitScript(`
      window.shown = 'visible'
      Object.defineProperty(document, 'visibilityState', { get: () => window.shown })`)
    const show = (state: 'hidden' | 'visible') =>
      page.evaluate(`window.shown = '${state}'; document.dispatchEvent(new Event('visibilitychange'))`)
    await signIn(page, night.house.people.owner.email, '/quarry-road/tonight')
    await night.report(118, 67)
    await page.getByText('244 °F').first().waitFor()
    await show('hidden')
    await expect.poll(() => said.some((text) => text.includes('attention')), { timeout: 15_000 }).toBe(true)
    const before = heard.length
    await night.report(119, 67)
    await night.report(121, 67)
    expect(heard.slice(before).filter((text) => !text.includes('"title"'))).toEqual([])
    expect(await page.getByText('250 °F').count()).toBe(0)
    await show('visible')
    await page.getByText('250 °F').first().waitFor()
  })

  it('shows the next person nothing of what the one before was shown', async () => {
    const { page } = await openPage(browser, night.url)
    const sockets: { closed: boolean }[] = []
    page.on('websocket', (socket) => {
      const seen = { closed: false }
      sockets.push(seen)
      socket.on('close', () => (seen.closed = true))
    })
    await signIn(page, night.house.people.owner.email, '/quarry-road/devices')
    await page.getByText('North box').first().waitFor()
    await page.getByRole('button', { name: /You: / }).click()
    await page.getByRole('button', { name: 'Sign out' }).click()
    await page.waitForURL('**/sign-in')
    await expect.poll(() => sockets.map(({ closed }) => closed)).toEqual([true])
    await page.goBack()
    await page.getByLabel('E-mail').waitFor()
    expect(await page.getByText('North box').count()).toBe(0)
  })

  it('can be gone through by keyboard: skip link, pages, the person’s choices', async () => {
    const { page } = await openPage(browser, night.url)
    const focused = () => page.evaluate<string>('document.activeElement?.textContent?.trim() ?? ""')
    await signIn(page, night.house.people.owner.email, '/quarry-road/cookers')
    await page.getByText('North Offset').first().waitFor()
    await page.reload()
    await page.getByText('North Offset').first().waitFor()
    await page.keyboard.press('Tab')
    expect(await focused()).toBe('Skip to the page')
    await page.getByRole('button', { name: /You: / }).focus()
    await page.keyboard.press('Enter')
    await page.keyboard.press('Tab')
    expect(await focused()).toBe('°F and lb')
    await expectAccessible(page)
    await page.keyboard.press('Escape')
    expect(await page.getByRole('button', { name: 'Sign out' }).isVisible()).toBe(false)
    await page.getByRole('link', { name: 'Pieces' }).focus()
    await page.keyboard.press('Enter')
    await page.getByRole('heading', { name: 'Pieces' }).waitFor()
    expect(await page.evaluate<string>('document.activeElement?.id ?? ""')).toBe('page')
  })

  it('tells a visit without a server from one without a session, and goes on by itself', async () => {
    const line = await cuttableProxy('127.0.0.1', Number(new URL(night.url).port))
    const { page } = await openPage(browser, `http://127.0.0.1:${line.port}`)
    await signIn(page, night.house.people.owner.email, '/quarry-road/pieces')
    await page.getByRole('heading', { name: 'Pieces' }).waitFor()
    await page.route('**/api/**', (route) => route.abort())
    await page.goto('/quarry-road/pieces')
    await page.getByRole('heading', { name: 'The server cannot be reached' }).waitFor()
    await expectAccessible(page)
    await page.unroute('**/api/**')
    await page.waitForURL('**/quarry-road/pieces')
    await page.getByRole('heading', { name: 'Pieces' }).waitFor()
    await line.cut()
    await page.getByText(/No line to the server since .* Trying again/).waitFor()
    await line.mend()
    await page.getByText(/No line to the server since/).waitFor({ state: 'detached', timeout: 30_000 })
    await page.context().close()
    await line.cut()
  })

  it('says what is wrong with a field in the person’s own units', async () => {
    const { page } = await openPage(browser, night.url)
    await signIn(page, night.house.people.owner.email, '/quarry-road/cookers')
    await page.getByRole('button', { name: 'Change North Offset' }).click()
    await page.getByLabel('Pit set').fill('2000')
    await page.getByRole('button', { name: 'Save' }).click()
    await page.getByText('At most 1112 °F.').waitFor()
  })
})
