import { shallowRef } from 'vue'
import type { ShallowRef } from 'vue'

/** True once the typeface is there: a canvas that is painted before keeps the fallback's letters. */
export function useChartFonts(): ShallowRef<boolean> {
  const ready = shallowRef(false)
  const faces = ['400', '600'].map((weight) => document.fonts.load(`${weight} 16px "IBM Plex Sans"`))
  void Promise.allSettled(faces).then(() => {
    ready.value = true
  })
  return ready
}
