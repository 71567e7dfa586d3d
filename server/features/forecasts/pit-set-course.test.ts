import { describe, expect, it } from 'vitest'
import { pitSetCourse, type SetChange } from './pit-set-course.ts'

let count = 0
function change(at: number, pitSetC: number, before: number | null): SetChange {
  count += 1
  return {
    id: `c${count}`,
    correctsId: null,
    happenedAt: at,
    recordedAt: at,
    fact: { kind: 'pit_set', pitSetC },
    pitSetBeforeC: before,
  }
}

describe('pitSetCourse', () => {
  it('is the set as it is where nothing was logged', () => {
    const course = pitSetCourse(
      [{ cookerId: 1, from: 0, to: null }],
      new Map([[1, { setNowC: 121, changes: [] }]]),
      50,
    )
    expect(course).toEqual([{ at: 0, pitSetC: 121 }])
  })

  it('knows what the set was before the first change', () => {
    const history = { setNowC: 110, changes: [change(20, 107, 121), change(40, 110, 107)] }
    expect(pitSetCourse([{ cookerId: 1, from: 0, to: null }], new Map([[1, history]]), 50)).toEqual([
      { at: 0, pitSetC: 121 },
      { at: 20, pitSetC: 107 },
      { at: 40, pitSetC: 110 },
    ])
  })

  it('knows nothing of what is still to come', () => {
    const history = { setNowC: 110, changes: [change(20, 107, 121), change(40, 110, 107)] }
    expect(pitSetCourse([{ cookerId: 1, from: 0, to: null }], new Map([[1, history]]), 30)).toEqual([
      { at: 0, pitSetC: 121 },
      { at: 20, pitSetC: 107 },
    ])
  })

  it('follows a move, and leaves out changes of pits it was not in', () => {
    const histories = new Map([
      [1, { setNowC: 135, changes: [change(30, 135, 121)] }],
      [2, { setNowC: 107, changes: [change(10, 107, 121), change(60, 100, 107)] }],
    ])
    const stretches = [
      { cookerId: 1, from: 0, to: 20 },
      { cookerId: 2, from: 20, to: 50 },
    ]
    expect(pitSetCourse(stretches, histories, 100)).toEqual([
      { at: 0, pitSetC: 121 },
      { at: 20, pitSetC: 107 },
    ])
  })

  it('notices a set that nobody logged', () => {
    const history = { setNowC: 115, changes: [change(20, 107, 121)] }
    expect(pitSetCourse([{ cookerId: 1, from: 25, to: null }], new Map([[1, history]]), 50)).toEqual([
      { at: 25, pitSetC: 107 },
      { at: 50, pitSetC: 115 },
    ])
  })

  it('forgets a change that was taken back', () => {
    const wrong = change(20, 170, 121)
    const undo: SetChange = { ...change(21, 0, null), fact: { kind: 'withdrawn' }, correctsId: wrong.id }
    const histories = new Map([[1, { setNowC: 121, changes: [wrong, undo] }]])
    expect(pitSetCourse([{ cookerId: 1, from: 0, to: null }], histories, 50)).toEqual([
      { at: 0, pitSetC: 121 },
    ])
  })
})
