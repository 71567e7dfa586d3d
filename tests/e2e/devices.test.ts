import type { Browser } from 'playwright-core'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { connectDevice, publish, record, topicOf } from '../broker/devices.ts'
import { expectAccessible, expectNoSidewaysScroll, launchBrowser, openPage } from '../harness/browser.ts'
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

const phone = { width: 360, height: 740 }

describe('the devices page', () => {
  it('changes a device’s secret on a phone: shown once, both good, the old one ended, by keyboard too', async () => {
    const { own, people } = night.house
    const watched = await openPage(browser, night.url, phone)
    const { page } = watched
    await signIn(page, people.engineer.email, '/quarry-road/devices')
    await page.getByText(/Connected by MQTT since \d\d:\d\d/).waitFor()
    await page.getByText(/\d messages, .* readings stored/).waitFor()
    await expectAccessible(page)

    const secrets = page.getByRole('button', { name: 'Secrets of North box' })
    await secrets.focus()
    await page.keyboard.press('Enter')
    await page.getByText('in use since').waitFor()
    await page.getByRole('button', { name: 'New secret' }).click()
    await page.getByText('for 24 hours').waitFor()
    await expectAccessible(page)
    await expectNoSidewaysScroll(page)
    await page.getByRole('button', { name: 'Make the secret' }).click()
    await page.getByText('The secret is shown this once.').waitFor()
    await page.getByText(/The old secret is good until .*\d\d:\d\d/).waitFor()
    await page.getByRole('button', { name: 'Copy: Secret' }).click()
    await page.getByText('Copied.').first().waitFor()
    await expectAccessible(page)
    await expectNoSidewaysScroll(page)
    const secret = (await page.locator('code').nth(1).textContent()) ?? ''
    expect(Buffer.from(secret, 'base64url')).toHaveLength(32)
    await page.getByRole('button', { name: 'Done' }).click()
    expect(await page.getByText(secret).count()).toBe(0)

    // The box that is connected goes on by the old secret; another connection comes with the new one.
    await night.report(121, 66)
    const renewed = await connectDevice(night.mqttPort, { ...own.device, secret }, { clientId: 'renewed' })
    await secrets.click()
    await page.getByText(/Newest/).waitFor()
    await expect.poll(() => page.getByText('in use since').count()).toBe(2)
    expect(await page.getByText(secret).count()).toBe(0)
    await page.getByRole('button', { name: /^End it now/ }).focus()
    await page.keyboard.press('Enter')
    await page.getByText('is connected with this secret and will be cut off').waitFor()
    await expectAccessible(page)
    expect(await page.evaluate<string>('document.activeElement?.textContent?.trim() ?? ""')).toBe(
      'Yes, end it',
    )
    await page.keyboard.press('Enter')
    await expect.poll(() => page.getByText('in use since').count()).toBe(1)
    await expect(connectDevice(night.mqttPort, own.device)).rejects.toMatchObject({ code: 4 })
    await publish(renewed, topicOf(own.device), [record(1, 122), record(2, 67)])
    await page.keyboard.press('Escape')

    await page.getByText('it gave a secret that has ended').waitFor({ timeout: 15_000 })
    await expectAccessible(page)
    await expectNoSidewaysScroll(page)
    await renewed.endAsync()
    watched.expectNoErrors()
  })

  it('says it in Spanish, and shows secrets and addresses to nobody who does not manage devices', async () => {
    const stranger = { ...night.house.own.device, secret: 'wrong' }
    await expect(connectDevice(night.mqttPort, stranger)).rejects.toMatchObject({ code: 4 })
    const { page } = await openPage(browser, night.url, phone)
    await signIn(page, night.house.people.manager.email, '/quarry-road/devices')
    await page.getByRole('button', { name: /You: / }).click()
    await page.getByRole('button', { name: 'Español' }).click()
    await page.getByText('dio una clave equivocada').waitFor({ timeout: 15_000 })
    await expectNoSidewaysScroll(page)
    expect(await page.getByRole('button', { name: /Claves/ }).count()).toBe(0)
    expect(await page.getByText('127.0.0.1').count()).toBe(0)
  })
})
