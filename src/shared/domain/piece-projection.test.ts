import { describe, expect, it } from 'vitest'
import { projectPiece, type CookFact, type LoggedEvent } from './piece-projection.ts'

const evening = Date.parse('2026-11-30T22:00:00Z')
const at = (hours: number) => evening + hours * 3_600_000

let count = 0
function event(hours: number, fact: CookFact, correctsId: string | null = null): LoggedEvent {
  count += 1
  return { id: `e${count}`, correctsId, happenedAt: at(hours), recordedAt: at(hours) + count, fact }
}
const on = event(0, { kind: 'on', cookerId: 1, position: 'top' })

describe('projectPiece', () => {
  it('waits until it goes on', () => {
    expect(projectPiece([])).toMatchObject({ stage: 'waiting', onAt: null, placements: [] })
    expect(projectPiece([event(-2, { kind: 'weighed', stage: 'trimmed', kg: 5.2 })])).toMatchObject({
      stage: 'waiting',
      trimmedKg: 5.2,
    })
  })

  it('follows a whole night', () => {
    const night = [
      on,
      event(4, { kind: 'spritz' }),
      event(7, { kind: 'wrap', method: 'paper' }),
      event(12, { kind: 'pull', by: 'feel' }),
      event(12.1, { kind: 'weighed', stage: 'cooked', kg: 3.1 }),
      event(12.2, { kind: 'rest' }),
      event(13, { kind: 'hold', cookerId: 5 }),
    ]
    expect(projectPiece(night)).toEqual({
      stage: 'holding',
      onAt: at(0),
      wrappedAt: at(7),
      wrappedWith: 'paper',
      pulledAt: at(12),
      restAt: at(12.2),
      holdAt: at(13),
      doneAt: null,
      trimmedKg: null,
      cookedKg: 3.1,
      slicedKg: null,
      placements: [
        { cookerId: 1, position: 'top', from: at(0), to: at(12) },
        { cookerId: 5, position: null, from: at(13), to: null },
      ],
    })
    const sliced = projectPiece([...night, event(15, { kind: 'sliced' })])
    expect(sliced).toMatchObject({ stage: 'done', doneAt: at(15) })
    expect(sliced.placements.at(-1)).toMatchObject({ cookerId: 5, to: at(15) })
  })

  it('orders by when things happened, not by when they were sent', () => {
    const late = [
      event(9, { kind: 'pull', by: 'temperature' }),
      event(6, { kind: 'wrap', method: 'foil' }),
      on,
    ]
    expect(projectPiece(late)).toMatchObject({
      stage: 'pulled',
      wrappedAt: at(6),
      pulledAt: at(9),
      placements: [{ cookerId: 1, from: at(0), to: at(9) }],
    })
  })

  it('takes a correction for what it corrects, through a chain of them', () => {
    const wrap = event(7, { kind: 'wrap', method: 'paper' })
    const earlier = event(6.5, { kind: 'wrap', method: 'paper' }, wrap.id)
    const foil = event(6.5, { kind: 'wrap', method: 'foil' }, earlier.id)
    expect(projectPiece([on, wrap, earlier])).toMatchObject({ wrappedAt: at(6.5), wrappedWith: 'paper' })
    expect(projectPiece([foil, on, wrap, earlier])).toMatchObject({ wrappedAt: at(6.5), wrappedWith: 'foil' })
  })

  it('forgets the whole chain when its end is taken back', () => {
    const wrap = event(7, { kind: 'wrap', method: 'paper' })
    const earlier = event(6.5, { kind: 'wrap', method: 'paper' }, wrap.id)
    const undo = event(7.2, { kind: 'withdrawn' }, earlier.id)
    expect(projectPiece([on, wrap, earlier, undo])).toMatchObject({
      stage: 'cooking',
      wrappedAt: null,
      wrappedWith: null,
    })
  })

  it('stands on its cooker again when a pull is taken back', () => {
    const pull = event(11, { kind: 'pull', by: 'temperature' })
    const wrap = event(7, { kind: 'wrap', method: 'boat' })
    const undone = projectPiece([on, wrap, pull, event(11.1, { kind: 'withdrawn' }, pull.id)])
    expect(undone).toMatchObject({ stage: 'wrapped', pulledAt: null })
    expect(undone.placements).toEqual([{ cookerId: 1, position: 'top', from: at(0), to: null }])
  })

  it('knows each cooker a piece stood on', () => {
    const moved = projectPiece([
      on,
      event(3, { kind: 'moved', toCookerId: 2, position: 'left' }),
      event(9, { kind: 'moved', toCookerId: 1 }),
      event(10, { kind: 'pull', by: 'temperature' }),
    ])
    expect(moved.placements).toEqual([
      { cookerId: 1, position: 'top', from: at(0), to: at(3) },
      { cookerId: 2, position: 'left', from: at(3), to: at(9) },
      { cookerId: 1, position: null, from: at(9), to: at(10) },
    ])
  })

  it('moves the start with a corrected going-on', () => {
    const earlier = event(-0.5, { kind: 'on', cookerId: 3 }, on.id)
    expect(projectPiece([on, earlier])).toMatchObject({
      onAt: at(-0.5),
      placements: [{ cookerId: 3, from: at(-0.5), to: null }],
    })
  })

  it('leaves no empty stretch on a cooker', () => {
    expect(projectPiece([on, event(0, { kind: 'moved', toCookerId: 2 })]).placements).toEqual([
      { cookerId: 2, position: null, from: at(0), to: null },
    ])
  })

  it('dates a pull that nobody logged by what came after it, until somebody says better', () => {
    const held = [on, event(12, { kind: 'hold', cookerId: 5 })]
    expect(projectPiece(held)).toMatchObject({
      stage: 'holding',
      pulledAt: at(12),
      placements: [
        { cookerId: 1, to: at(12) },
        { cookerId: 5, from: at(12), to: null },
      ],
    })
    expect(projectPiece([...held, event(11, { kind: 'pull', by: 'temperature' })])).toMatchObject({
      stage: 'holding',
      pulledAt: at(11),
    })
  })

  it('holds where it stood when no cooker is named', () => {
    expect(projectPiece([on, event(11, { kind: 'hold' })]).placements).toEqual([
      { cookerId: 1, position: 'top', from: at(0), to: at(11) },
    ])
  })

  it('is resting again when it is taken out of the hold', () => {
    const events = [
      on,
      event(10, { kind: 'pull', by: 'feel' }),
      event(11, { kind: 'hold' }),
      event(12, { kind: 'rest' }),
    ]
    expect(projectPiece(events)).toMatchObject({ stage: 'resting', holdAt: at(11), restAt: at(12) })
  })
})
