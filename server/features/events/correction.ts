import type { CookEvent, NewEvent } from '#shared/contract/event.ts'
import { conflict, unprocessable } from '../../http/problem.ts'

/**
 * Checks that an event may correct the one it names: one of the same subject, not corrected yet, of the same kind
 * unless it is taken back.
 * @param log everything logged on the subject
 * @returns the corrected event; undefined when the event corrects nothing
 * @throws HttpProblem 422 when it may not, 409 when somebody corrected it already
 */
export function correctedBy(event: NewEvent, log: readonly CookEvent[]): CookEvent | undefined {
  const { correctsId, fact } = event
  if (correctsId === undefined) {
    if (fact.kind === 'withdrawn') throw refuse('Name the entry that is taken back.')
    return undefined
  }
  const target = log.find((candidate) => candidate.id === correctsId)
  if (!target) throw refuse('The entry to correct is not in this log.')
  if (target.correctedById !== null) {
    throw conflict('Somebody corrected that entry already. Look again, then correct the correction.')
  }
  if (target.fact.kind === 'withdrawn') throw refuse('That entry was taken back: log it again instead.')
  if (fact.kind !== 'withdrawn' && fact.kind !== target.fact.kind) {
    throw refuse('A correction is of the same kind as what it corrects. Take the entry back and log another.')
  }
  return target
}

function refuse(message: string) {
  return unprocessable(message, [{ at: 'correctsId', message }])
}
