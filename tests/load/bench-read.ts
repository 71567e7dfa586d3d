// How fast history is read through the API, on 20 million readings beside 1 million in the same run.
// `npm run bench:read -- --rows 20000000 --small 1000000 --rounds 300`
import { parseArgs } from 'node:util'
import { z } from 'zod'
import { openDatabase } from '../../server/db/database.ts'
import { startReadSubject, type ReadSubject } from './read/read-subject.ts'
import { createTimings } from './read/timings.ts'
import { startScratchPostgres } from './scratch-postgres.ts'

/** What has to hold. */
const floors = { pieceMs: 30, pieceOfSmall: 1.5, latestMs: 5 }

const options = readOptions()
const timings = createTimings()
const postgres = await startScratchPostgres()
const subjects: ReadSubject[] = []
try {
  const small = await start('small', options.small)
  const large = await start('large', options.rows)
  await measure(small, large)
  const missed = report(small, large, await large.rollUpRate())
  for (const floor of missed) console.log(`Floor missed: ${floor}`)
  process.exitCode = missed.length === 0 ? 0 : 1
} finally {
  for (const subject of subjects) await subject.stop()
  await postgres.remove()
}

async function start(name: string, rows: number): Promise<ReadSubject> {
  const begun = performance.now()
  const admin = openDatabase(postgres.url, { max: 2 })
  await admin.raw(`create database bench_${name}`)
  await admin.destroy()
  const url = new URL(postgres.url)
  url.pathname = `/bench_${name}`
  const subject = await startReadSubject(url.href, rows, timings)
  subjects.push(subject)
  const { history } = subject
  const seconds = ((performance.now() - begun) / 1000).toFixed(0)
  console.log(`${history.rows} readings of ${history.nights} nights, filled in ${seconds} s`)
  return subject
}

/** Both databases in turn, so that what disturbs the machine disturbs both. */
async function measure(small: ReadSubject, large: ReadSubject): Promise<void> {
  const round = async (prefix: string, index: number) => {
    for (const [size, subject] of [
      ['small', small],
      ['large', large],
    ] as const) {
      const name = (what: string) => `${prefix}${size} ${what}`
      await subject.nothing(name('nothing'))
      await subject.pieceTrace(name('piece'))
      await subject.latest(name('latest'))
      await subject.rawRows(name('raw'))
      if (index % 10 !== 0) continue
      await subject.tonight(name('tonight'))
      await subject.hour(name('hour'))
      await subject.week(name('week'))
      await subject.longLine(name('long'))
    }
  }
  // Every piece once and more: the first time a page is read is the disk's.
  for (let index = 0; index < 60; index++) await round('warm ', index)
  for (let index = 0; index < options.rounds; index++) await round('', index)
}

function report(small: ReadSubject, large: ReadSubject, rollUpRate: number): string[] {
  const median = (name: string) => timings.quantile(name, 0.5)
  const p99 = (name: string) => timings.quantile(name, 0.99)
  const ms = (value: number) => value.toFixed(1).padStart(8)
  const millions = (subject: ReadSubject) => `${(subject.history.rows / 1e6).toFixed(1)} M`
  console.log(
    `\n${'ms, median and 99th of 100'.padEnd(48)}${millions(small).padStart(16)}${millions(large).padStart(16)}   ratio`,
  )
  const line = (title: string, name: string) => {
    const of = (size: string) => `${ms(median(`${size} ${name}`))}${ms(p99(`${size} ${name}`))}`
    const ratio = median(`large ${name}`) / median(`small ${name}`)
    console.log(`${title.padEnd(48)}${of('small')}${of('large')}${ratio.toFixed(2).padStart(8)}`)
    return ratio
  }
  line('baseline: “select 1” over HTTP', 'nothing')
  line('baseline: a night’s rows of two channels, SQL', 'raw')
  const ratio = line('a piece’s 14 hours, core and pit, API', 'piece')
  line('latest of 200 channels, SQL', 'latest')
  line('tonight of the site, API', 'tonight')
  line('an hour of 24 channels, API', 'hour')
  line('a week of 24 channels, API', 'week')
  line('two years of a pit that never goes out, API', 'long')
  console.log(
    `${'quarters rolled up a second'.padEnd(48)}${''.padEnd(16)}${rollUpRate.toFixed(0).padStart(8)}`,
  )

  const missed: string[] = []
  const check = (holds: boolean, words: string) => {
    if (!holds) missed.push(words)
  }
  const piece = median('large piece')
  check(piece < floors.pieceMs, `a piece’s 14 hours in ${piece.toFixed(1)} ms, not under ${floors.pieceMs}`)
  check(ratio <= floors.pieceOfSmall, `${ratio.toFixed(2)} times the small one’s, not ${floors.pieceOfSmall}`)
  const latest = median('large latest')
  check(latest < floors.latestMs, `latest of 200 in ${latest.toFixed(1)} ms, not under ${floors.latestMs}`)
  return missed
}

function readOptions() {
  const text = { type: 'string' } as const
  const { values } = parseArgs({ options: { rows: text, small: text, rounds: text } })
  return z
    .object({
      rows: z.coerce.number().int().min(100_000).default(20_000_000),
      small: z.coerce.number().int().min(100_000).default(1_000_000),
      rounds: z.coerce.number().int().min(10).default(300),
    })
    .parse(values)
}
