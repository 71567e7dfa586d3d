import { describe, expect, it } from 'vitest'
import type { PieceStage } from '@/shared/contract/piece.ts'
import { pieceStages } from '@/shared/contract/piece.ts'
import { sequenceFault } from '@/shared/domain/event-sequence.ts'
import type { LoggedEvent } from '@/shared/domain/piece-projection.ts'
import { projectPiece } from '@/shared/domain/piece-projection.ts'
import { eventChoices } from './event-choices.ts'

const cabinet = { id: 5, name: 'Holding Cabinet' }
const keys = (stage: PieceStage, wrapMethod: 'none' | 'paper' | 'foil' | 'boat' = 'paper') => {
  const { next, more } = eventChoices({ stage, wrapMethod }, [cabinet])
  return { next: next.map(({ key }) => key), more: more.map(({ key }) => key) }
}

/** A log that brings a piece to a stage. */
function logTo(stage: PieceStage): LoggedEvent[] {
  const facts: Record<PieceStage, LoggedEvent['fact'][]> = {
    waiting: [],
    cooking: [{ kind: 'on', cookerId: 1 }],
    wrapped: [
      { kind: 'on', cookerId: 1 },
      { kind: 'wrap', method: 'paper' },
    ],
    pulled: [
      { kind: 'on', cookerId: 1 },
      { kind: 'pull', by: 'feel' },
    ],
    resting: [{ kind: 'on', cookerId: 1 }, { kind: 'pull', by: 'feel' }, { kind: 'rest' }],
    holding: [{ kind: 'on', cookerId: 1 }, { kind: 'pull', by: 'feel' }, { kind: 'hold' }],
    done: [{ kind: 'on', cookerId: 1 }, { kind: 'sliced' }],
  }
  return facts[stage].map((fact, i) => logged(fact, i))
}

function logged(fact: LoggedEvent['fact'], i: number): LoggedEvent {
  return { id: `e${i}`, correctsId: null, happenedAt: i * 1000, recordedAt: i * 1000, fact }
}

describe('eventChoices', () => {
  it('offers the planned wrap first', () => {
    expect(keys('cooking', 'boat').next.slice(0, 3)).toEqual(['wrap-boat', 'wrap-paper', 'wrap-foil'])
  })

  it('offers the pull once wrapped, and the cabinet of this site after the rest', () => {
    expect(keys('wrapped').next[0]).toBe('pull-temperature')
    expect(keys('resting').next[0]).toBe('hold-5')
    expect(eventChoices({ stage: 'resting', wrapMethod: 'paper' }, []).next[0]).toMatchObject({ key: 'hold' })
  })

  it('always lets a note and a weight be written', () => {
    for (const stage of pieceStages)
      expect(keys(stage).more).toEqual(expect.arrayContaining(['note', 'weighed']))
  })

  it.each(pieceStages)('offers nothing that the log would refuse (%s)', (stage) => {
    const log = logTo(stage)
    expect(projectPiece(log).stage).toBe(stage)
    const { next, more } = eventChoices({ stage, wrapMethod: 'paper' }, [cabinet])
    for (const choice of [...next, ...more]) {
      if ('ask' in choice || choice.fact.kind === 'fire_tended') continue
      expect(sequenceFault([...log, logged(choice.fact, 99)])).toBeUndefined()
    }
  })
})
