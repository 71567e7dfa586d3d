import type { Browser, Page } from 'playwright-core'
import { afterAll, beforeAll, describe, it } from 'vitest'
import { expectAccessible, expectNoSidewaysScroll, launchBrowser, openPage } from '../harness/browser.ts'
import { cuttableProxy } from '../harness/cuttable-proxy.ts'
import { housePassword } from '../harness/house.ts'
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

describe('the main job, in a browser', () => {
  it('goes from the door to the wall, which moves, to a piece, whose wrap shows in a second tab', async () => {
    const first = await openPage(browser, night.url)
    const { page } = first
    await page.goto('/')
    await page.getByLabel('E-mail').fill(night.house.people.crew.email)
    await page.getByLabel('Password', { exact: true }).fill(housePassword)
    await expectAccessible(page)
    await page.getByRole('button', { name: 'Sign in' }).click()

    await page.getByRole('heading', { name: 'North Offset' }).waitFor()
    await night.report(118.3, 67.4)
    await page.getByText('245 °F').first().waitFor()
    await night.report(123.9, 67.6)
    await page.getByText('255 °F').first().waitFor()
    await page.locator('canvas').first().waitFor()
    await expectAccessible(page)

    await page.getByRole('link', { name: 'N1' }).first().click()
    await page.getByRole('heading', { name: 'N1' }).waitFor()
    await page.getByText('154 °F').first().waitFor()
    await expectAccessible(page)

    const second = await openPage(browser, night.url)
    await signIn(second.page, night.house.people.lead.email, `/quarry-road/pieces/${night.pieceId}`)
    await second.page.getByRole('button', { name: 'Wrap, paper', exact: true }).waitFor()
    await page.getByRole('button', { name: 'Wrap, paper', exact: true }).click()
    await second.page.getByText(night.house.people.crew.name).first().waitFor()
    await second.page.getByText('wrapped · North Offset').waitFor()

    await page.getByRole('button', { name: 'Undo' }).click()
    await second.page.getByText('cooking · North Offset').waitFor()
    first.expectNoErrors()
    second.expectNoErrors()
  })

  it('says in words that a password is wrong', async () => {
    const { page } = await openPage(browser, night.url)
    await page.goto('/sign-in')
    await page.getByLabel('E-mail').fill(night.house.people.crew.email)
    await page.getByLabel('Password', { exact: true }).fill('not this one')
    await page.getByRole('button', { name: 'Sign in' }).click()
    await page.getByText('That e-mail address and password do not go together.').waitFor()
  })

  it('starts a piece, which then stands in the list', async () => {
    const watched = await openPage(browser, night.url)
    const { page } = watched
    await signIn(page, night.house.people.lead.email, '/quarry-road/start')
    await page.getByRole('heading', { name: 'Start a piece' }).waitFor()
    await expectAccessible(page)
    await choose(page, 'Recipe', 'House Brisket')
    await page.getByLabel('Name').fill('N2')
    await page.getByLabel('Raw weight').fill('14')
    await choose(page, 'Cooker', 'North Offset')
    await page.getByRole('button', { name: 'Start a piece' }).click()
    await page.getByRole('heading', { name: 'N2' }).waitFor()
    await page.getByRole('link', { name: 'Pieces' }).click()
    await page.getByRole('link', { name: 'N2' }).waitFor()
    watched.expectNoErrors()
  })

  it('shows Fahrenheit and pounds, or Celsius and kilograms, as one chooses', async () => {
    const { page } = await openPage(browser, night.url)
    await signIn(page, night.house.people.manager.email, '/quarry-road/pieces')
    await page.getByText('13.7 lb').waitFor()
    await page.getByRole('button', { name: /You: / }).click()
    await page.getByRole('button', { name: '°C and kg' }).click()
    await page.getByText('6.2 kg').waitFor()
    await page.getByRole('button', { name: 'Español' }).click()
    await page.getByRole('heading', { name: 'Piezas' }).waitFor()
  })

  it('says that readings are stale once the device is silent', async () => {
    const watched = await openPage(browser, night.url)
    const { page } = watched
    await signIn(page, night.house.people.crew.email, '/quarry-road/tonight')
    await night.report(121, 68)
    await page.getByText('250 °F').first().waitFor()
    await page
      .getByText(/silent (under|\d)/)
      .first()
      .waitFor({ timeout: 30_000 })
    await night.report(121.5, 68.1)
    await page
      .getByText(/silent (under|\d)/)
      .first()
      .waitFor({ state: 'detached' })
    watched.expectNoErrors()
  })

  it('says that the line to the server is lost, and goes on by itself when it is back', async () => {
    const line = await cuttableProxy('127.0.0.1', Number(new URL(night.url).port))
    const { page } = await openPage(browser, `http://127.0.0.1:${line.port}`)
    await signIn(page, night.house.people.crew.email, '/quarry-road/tonight')
    await night.report(117.2, 68.2)
    await page.getByText('243 °F').first().waitFor()
    await line.cut()
    await page.getByText(/No line to the server since/).waitFor()
    await line.mend()
    await page.getByText(/No line to the server since/).waitFor({ state: 'detached', timeout: 30_000 })
    await night.report(122.8, 68.3)
    await page.getByText('253 °F').first().waitFor()
    await page.context().close()
    await line.cut()
  })
})

const pages = ['tonight', 'wall', 'pieces', 'piece', 'start', 'cookers', 'devices'] as const

/** What stands on a page once its data are there. */
const landmarks = {
  tonight: 'North Offset',
  wall: 'North Offset',
  pieces: 'House Brisket',
  piece: 'House Brisket',
  start: 'Recipe',
  cookers: 'North Offset',
  devices: 'North box',
} as const

describe.each([
  { width: 360, height: 740 },
  { width: 1440, height: 900 },
  { width: 1920, height: 1080 },
])('at $width px', (size) => {
  it.each(['dark', 'light'] as const)(
    'every page in %s is accessible and does not stick out',
    async (colorScheme) => {
      const watched = await openPage(browser, night.url, { ...size, colorScheme })
      const { page } = watched
      await signIn(page, night.house.people.owner.email, '/quarry-road/tonight')
      for (const path of pages) {
        await page.goto(`/quarry-road/${path === 'piece' ? `pieces/${night.pieceId}` : path}`)
        await page.getByText(landmarks[path]).first().waitFor({ state: 'attached' })
        await expectNoSidewaysScroll(page, path)
        await expectAccessible(page, path)
      }
      watched.expectNoErrors()
    },
  )
})

/** Opens one of the form's lists and takes an entry of it. */
async function choose(page: Page, field: string, entry: string): Promise<void> {
  await page.getByLabel(field, { exact: true }).click()
  await page.locator('.n-base-select-option').filter({ hasText: entry }).click()
}
