import { seededRandom } from '#shared/domain/random.ts'

/** How the crew will treat one piece: whoever is on, they get to it when they get to it. */
export interface CrewHabits {
  /** From the wrap temperature to the wrap, s; the same from the pull temperature to the pull. */
  wrapDelayS: number
  pullDelayS: number
  /** On the table before it goes into the cabinet, s. */
  restS: number
  /** When it is spritzed, s after it went on. */
  spritzS: number[]
  /** From noticing a slipped probe to pushing it in again, s after it slipped. */
  reseatS: number
}

/** Draws the crew's habits with one piece. The spans are common practice: a quarter of an hour is soon. */
export function drawCrewHabits(pieceSeed: string): CrewHabits {
  const random = seededRandom(pieceSeed, 'crew')
  const between = (least: number, most: number) => Math.round(least + (most - least) * random.uniform())
  const spritzes = Math.floor(4 * random.uniform())
  return {
    wrapDelayS: between(10 * 60, 25 * 60),
    pullDelayS: between(6 * 60, 22 * 60),
    restS: between(25 * 60, 55 * 60),
    spritzS: Array.from({ length: spritzes }, (_, turn) => (150 + 75 * turn + between(-12, 12)) * 60),
    reseatS: between(10 * 60, 30 * 60),
  }
}
