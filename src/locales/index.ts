import { createI18n } from 'vue-i18n'
import { en } from './en/index.ts'
import { es } from './es/index.ts'

export const locales = ['en', 'es'] as const
export type LocaleName = (typeof locales)[number]

/** The language tags that numbers and dates are written by. */
export const localeTags: Record<LocaleName, string> = { en: 'en-US', es: 'es-US' }

/**
 * The product's texts. Messages are compiled to a tree, not to code, so that the page's strict content security
 * policy (no eval) holds.
 */
export function createTexts(locale: LocaleName) {
  return createI18n({ legacy: false, locale, fallbackLocale: 'en', messages: { en, es } })
}
