import { useLocalStorage, usePreferredDark } from '@vueuse/core'
import { defineStore } from 'pinia'
import { computed, ref } from 'vue'
import { call } from '@/api/client.ts'
import type { ThemeName } from '@/assets/tokens.ts'
import { Preferences, sessionEndpoints } from '@/shared/contract/session.ts'

const storageKey = 'coalhand.preferences'
/** What the house uses unless someone chose otherwise: °F and lb, the system's theme, English. */
const houseDefault: Preferences = { units: 'us', theme: 'system', locale: 'en' }

/**
 * What a person chose for themselves. Kept on this device too, so that the sign-in page already looks and speaks
 * as it did last time; the account's own choice wins once someone is signed in.
 */
export const usePreferences = defineStore('preferences', () => {
  const stored = useLocalStorage<unknown>(storageKey, null, {
    serializer: { read: parseStored, write: (value) => JSON.stringify(value) },
  })
  const known = Preferences.safeParse(stored.value)
  const chosen = ref<Preferences>(known.success ? known.data : { ...houseDefault, locale: browserLocale() })
  const prefersDark = usePreferredDark()
  const signedIn = ref(false)

  const units = computed(() => chosen.value.units)
  const locale = computed(() => chosen.value.locale)
  const theme = computed(() => chosen.value.theme)
  /** The theme that is drawn: `system` resolved. */
  const shownTheme = computed<ThemeName>(() => {
    if (chosen.value.theme !== 'system') return chosen.value.theme
    return prefersDark.value ? 'night' : 'paper'
  })

  /** Takes over what the account says. */
  function follow(preferences: Preferences | null): void {
    signedIn.value = preferences !== null
    if (preferences !== null) keep(preferences)
  }

  /** Changes a choice: at once here, and in the account when someone is signed in. Throws when that fails. */
  async function choose(change: Partial<Preferences>): Promise<void> {
    const before = chosen.value
    keep({ ...before, ...change })
    if (!signedIn.value) return
    await call(sessionEndpoints.setPreferences, { body: change }).catch((error: unknown) => {
      keep(before)
      throw error
    })
  }

  function keep(preferences: Preferences): void {
    chosen.value = preferences
    stored.value = preferences
  }

  return { units, locale, theme, shownTheme, follow, choose }
})

function parseStored(text: string): unknown {
  try {
    const value: unknown = JSON.parse(text)
    return value
  } catch {
    return null
  }
}

function browserLocale(): Preferences['locale'] {
  return navigator.language.toLowerCase().startsWith('es') ? 'es' : 'en'
}
