import type { Page } from 'playwright-core'
import { housePassword } from '../harness/house.ts'

/** Signs in at the door that a guarded page leads to, and arrives at that page. */
export async function signIn(page: Page, email: string, path: string): Promise<void> {
  await page.goto(path)
  await page.getByLabel('E-mail').fill(email)
  await page.getByLabel('Password', { exact: true }).fill(housePassword)
  await page.getByRole('button', { name: 'Sign in' }).click()
  await page.waitForURL((url) => url.pathname === path)
}
