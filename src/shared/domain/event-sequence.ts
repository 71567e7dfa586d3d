import { effectiveEvents } from './effective-events.ts'
import type { LoggedEvent } from './piece-projection.ts'

/** Why a piece's events cannot have happened as logged. */
export const sequenceFaults = {
  'not-on': 'This piece is not on a cooker yet: log when it went on first.',
  'on-twice': 'This piece went on already. Log a move when it changes its cooker.',
  'before-on': 'That would be before the piece went on.',
  'pulled-twice': 'This piece is pulled already. Correct that entry, or take it back.',
  'wrapped-after-pull': 'This piece was pulled before that: it cannot be wrapped on the fire any more.',
  'pulled-after-rest': 'It was resting, held or sliced before that: the pull comes first.',
  'sliced-twice': 'This piece is sliced already. Correct that entry, or take it back.',
  'after-slicing': 'This piece was sliced before that.',
} as const
export type SequenceFault = keyof typeof sequenceFaults

/** What may be logged before a piece goes on and after it is sliced: it says nothing about where the piece is. */
const anyTime = new Set(['note', 'weighed'])

/**
 * Whether a piece's events, corrections included, can have happened in that order. As lenient as a kitchen: nothing
 * has to be logged but going on, and entries may come late in any order; refused is only what contradicts itself.
 * @returns the first fault in time order; undefined when there is none
 */
export function sequenceFault(events: readonly LoggedEvent[]): SequenceFault | undefined {
  const happened = effectiveEvents(events)
  const on = happened.find((event) => event.fact.kind === 'on')
  let isOn = false
  let pulled = false
  let rested = false
  let sliced = false
  for (const { fact } of happened) {
    if (anyTime.has(fact.kind)) continue
    if (fact.kind === 'on') {
      if (isOn) return 'on-twice'
      isOn = true
      continue
    }
    if (!isOn) return on ? 'before-on' : 'not-on'
    if (sliced) return fact.kind === 'sliced' ? 'sliced-twice' : 'after-slicing'
    if (fact.kind === 'pull') {
      if (pulled) return 'pulled-twice'
      if (rested) return 'pulled-after-rest'
      pulled = true
    }
    if (fact.kind === 'wrap' && (pulled || rested)) return 'wrapped-after-pull'
    if (fact.kind === 'rest' || fact.kind === 'hold') rested = true
    if (fact.kind === 'sliced') sliced = true
  }
  return undefined
}
