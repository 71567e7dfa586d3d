import { fileURLToPath } from 'node:url'
import type { Browser, Page } from 'playwright-core'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { createLatePool } from '../api/late-pool.ts'
import { startCook } from '../api/start-cook.ts'
import { expectAccessible, expectNoSidewaysScroll, launchBrowser, openPage } from '../harness/browser.ts'
import { startTestServer, type TestServer } from '../harness/server.ts'
import { signIn } from './sign-in.ts'

let server: TestServer
let browser: Browser
/** Whether the worker threads get less time than any forecast takes. */
let isLate = false

beforeAll(async () => {
  const start = startTestServer({
    mqtt: { host: '127.0.0.1', port: 0 },
    clientDir: fileURLToPath(new URL('../../dist/client', import.meta.url)),
    jobs: {
      byTheClock: false,
      makePool: () => createLatePool(() => isLate),
    },
  })
  ;[server, browser] = await Promise.all([start, launchBrowser()])
})
afterAll(async () => {
  await browser.close()
  await server.stop()
})

const path = '/quarry-road/server'
const row = (page: Page, name: string) => page.getByRole('row').filter({ hasText: name })

describe('the server’s page', () => {
  it('shows the engineer every part and job, and runs one on request', async () => {
    const watched = await openPage(browser, server.url)
    const { page } = watched
    await signIn(page, server.house.people.engineer.email, '/quarry-road/tonight')
    await page.getByRole('link', { name: 'Server' }).click()
    await page.getByText('Stores and answers.').waitFor()
    for (const part of [
      'Devices connected by MQTT: 0.',
      'Stores what comes. Waiting: 0.',
      'Pages that follow',
    ]) {
      await page.getByText(part).waitFor()
    }
    await page.getByText('Nothing fails.').waitFor()
    const learning = row(page, 'Learning from finished cooks')
    await learning.getByText('not yet').waitFor()
    await learning.getByRole('button', { name: 'Run now' }).click()
    await page.getByText('Learning from finished cooks: will run at once.').waitFor()
    await learning.getByText('just now').waitFor()
    await expectAccessible(page)
    watched.expectNoErrors()
  })

  it('shows what fails and why, and tries it again', async () => {
    const { page } = await openPage(browser, server.url)
    await signIn(page, server.house.people.owner.email, path)
    isLate = true
    await startCook(server, 'N7')
    const failing = row(page, 'Forecast of a piece: N7')
    await failing.getByText(/abort/i).waitFor()
    await page.getByText('Failing now: 1.').waitFor()
    await page.getByText('not well').first().waitFor()
    await expectAccessible(page)
    isLate = false
    await failing.getByRole('button', { name: 'Try again' }).click()
    await page.getByText('Nothing fails.').waitFor()
    await page.getByText('All done in time. Waiting: 0.').waitFor()
    expect(await server.db('forecasts').count({ count: '*' })).not.toEqual([{ count: 0 }])
  })

  it('can be read on a phone, on paper and in Spanish', async () => {
    await server
      .as('engineer')
      .patch('/api/me/preferences')
      .send({ locale: 'es', theme: 'paper' })
      .expect(200)
    const { page } = await openPage(browser, server.url, { width: 360, height: 780 })
    await signIn(page, server.house.people.engineer.email, path)
    await page.getByText('Guarda y responde.').waitFor()
    await page.getByRole('button', { name: 'Hacer ahora: Ronda de pronósticos' }).waitFor()
    await expectNoSidewaysScroll(page)
    await expectAccessible(page)
  })

  it('is not there for the crew', async () => {
    const { page } = await openPage(browser, server.url)
    await signIn(page, server.house.people.crew.email, '/quarry-road/tonight')
    expect(await page.getByRole('link', { name: 'Server' }).count()).toBe(0)
    await page.goto(path)
    await page.getByText('There is nothing at this address').waitFor()
  })
})
