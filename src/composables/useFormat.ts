import { computed, toValue, type MaybeRefOrGetter } from 'vue'
import { useI18n } from 'vue-i18n'
import { useSite } from '@/composables/useSite.ts'
import { localeTags } from '@/locales/index.ts'
import { usePreferences } from '@/stores/preferences.ts'
import { usePresent } from '@/stores/present.ts'
import { createFormat, type Format } from './format.ts'

/**
 * The formatter for the page's site and the person's choices. Its methods follow a change of units or language
 * when they are called in a template or a computed; the object itself stays the same.
 * A zone may be given for a time of another site.
 */
export function useFormat(timeZone?: MaybeRefOrGetter<string>): Format {
  const preferences = usePreferences()
  const present = usePresent()
  const { t } = useI18n()
  const site = useSite()
  const current = computed(() =>
    createFormat({
      locale: localeTags[preferences.locale],
      units: preferences.units,
      timeZone: timeZone === undefined ? site.timeZone.value : toValue(timeZone),
      // Only the day matters here: following each second would redraw every figure on the page.
      now: () => present.quarter,
      words: (key, values) => t(key, values ?? {}),
    }),
  )
  return {
    get units() {
      return current.value.units
    },
    get timeZone() {
      return current.value.timeZone
    },
    get temperatureUnit() {
      return current.value.temperatureUnit
    },
    get massUnit() {
      return current.value.massUnit
    },
    temperature: (...values) => current.value.temperature(...values),
    temperatureSpan: (...values) => current.value.temperatureSpan(...values),
    temperatureDifference: (...values) => current.value.temperatureDifference(...values),
    mass: (...values) => current.value.mass(...values),
    percent: (...values) => current.value.percent(...values),
    number: (...values) => current.value.number(...values),
    clock: (...values) => current.value.clock(...values),
    day: (...values) => current.value.day(...values),
    date: (...values) => current.value.date(...values),
    zone: (...values) => current.value.zone(...values),
    duration: (...values) => current.value.duration(...values),
    ago: (...values) => current.value.ago(...values),
    interval: (...values) => current.value.interval(...values),
    forecast: (...values) => current.value.forecast(...values),
    temperatureNumber: (...values) => current.value.temperatureNumber(...values),
    celsius: (...values) => current.value.celsius(...values),
    massNumber: (...values) => current.value.massNumber(...values),
    kilograms: (...values) => current.value.kilograms(...values),
  }
}
