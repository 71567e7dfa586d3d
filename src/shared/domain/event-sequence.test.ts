import { describe, expect, it } from 'vitest'
import { sequenceFault } from './event-sequence.ts'
import type { CookFact, LoggedEvent } from './piece-projection.ts'

let count = 0
function event(at: number, fact: CookFact, correctsId: string | null = null): LoggedEvent {
  count += 1
  return { id: `e${count}`, correctsId, happenedAt: at, recordedAt: at + count / 1000, fact }
}
const on = event(0, { kind: 'on', cookerId: 1 })
const wrap = (at: number) => event(at, { kind: 'wrap', method: 'paper' })
const pull = (at: number) => event(at, { kind: 'pull', by: 'temperature' })

describe('sequenceFault', () => {
  it('lets a kitchen be a kitchen', () => {
    expect(sequenceFault([])).toBeUndefined()
    expect(sequenceFault([on, pull(9)])).toBeUndefined()
    expect(sequenceFault([on, event(9, { kind: 'sliced' })])).toBeUndefined()
    expect(sequenceFault([pull(9), wrap(7), wrap(6), on])).toBeUndefined()
    expect(
      sequenceFault([on, pull(9), event(12, { kind: 'sliced' }), event(20, { kind: 'note' })]),
    ).toBeUndefined()
    expect(sequenceFault([event(-3, { kind: 'weighed', stage: 'trimmed', kg: 5 }), on])).toBeUndefined()
  })

  it.each([
    ['not-on', [wrap(3)]],
    ['before-on', [on, wrap(-1)]],
    ['on-twice', [on, event(2, { kind: 'on', cookerId: 2 })]],
    ['pulled-twice', [on, pull(8), pull(9)]],
    ['wrapped-after-pull', [on, pull(8), wrap(9)]],
    ['wrapped-after-pull', [on, event(8, { kind: 'rest' }), wrap(9)]],
    ['pulled-after-rest', [on, event(8, { kind: 'hold' }), pull(9)]],
    ['sliced-twice', [on, event(8, { kind: 'sliced' }), event(9, { kind: 'sliced' })]],
    ['after-slicing', [on, event(8, { kind: 'sliced' }), event(9, { kind: 'moved', toCookerId: 2 })]],
  ] as const)('says %s', (fault, events) => {
    expect(sequenceFault(events)).toBe(fault)
  })

  it('looks at what counts after corrections', () => {
    const first = pull(8)
    expect(sequenceFault([on, first, event(9, { kind: 'pull', by: 'feel' }, first.id)])).toBeUndefined()
    expect(sequenceFault([on, first, event(9, { kind: 'withdrawn' }, first.id), wrap(10)])).toBeUndefined()
    expect(sequenceFault([on, wrap(3), event(4, { kind: 'on', cookerId: 1 }, on.id)])).toBe('before-on')
    expect(sequenceFault([on, wrap(3), event(4, { kind: 'withdrawn' }, on.id)])).toBe('not-on')
  })
})
