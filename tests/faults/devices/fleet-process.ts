import { systemClock } from '#shared/domain/clock.ts'
import { seededRandom } from '#shared/domain/random.ts'
import { createBox, type Box } from './box.ts'
import type { BoxPlan } from './plan.ts'
import { Numbered, type Delays, type FleetCounts, type FleetOrder } from './protocol.ts'

/** A process of its own full of probe boxes, so that nothing else that a scenario does delays them. */

const tickMs = 2
/** Milliseconds since 1970 UTC at this process's monotonic zero. */
const originMs = systemClock.now() - performance.now()

let boxes: Box[] = []
let measuredFrom = 0
let delays: number[] = []
let allConnectedAtMs: number | null = null
let onNextAcknowledgement: ((atMs: number) => void)[] = []

process.on('message', (message) => {
  const { id, order } = Numbered.parse(message)
  void carryOut(order).then((result) => process.send?.({ id, result: result ?? null }))
})
process.on('disconnect', () => process.exit(0))

async function carryOut(order: FleetOrder): Promise<unknown> {
  switch (order.do) {
    case 'begin':
      begin(order)
      return
    case 'counts':
      return counts()
    case 'next-acknowledgement':
      return new Promise((resolve) => onNextAcknowledgement.push(resolve))
    case 'measure':
      measuredFrom = performance.now()
      delays = []
      return
    case 'delays':
      return summary()
    case 'finish':
      for (const box of boxes) box.stopSampling()
      while (!boxes.every((box) => box.isDone())) await new Promise((resolve) => setTimeout(resolve, 10))
      return { due: boxes.map((box) => box.counts().due) }
    case 'quit':
      for (const box of boxes) box.close()
      setTimeout(() => process.exit(0), 200)
  }
}

function begin({ port, seed, boxes: plans }: { port: number; seed: string; boxes: BoxPlan[] }): void {
  const random = seededRandom('boxes', seed)
  boxes = plans.map((plan) => createBox({ port, plan, random }, acknowledged))
  setInterval(() => {
    const nowMs = originMs + performance.now()
    for (const box of boxes) box.tick(nowMs)
    if (allConnectedAtMs === null && boxes.every((box) => box.counts().connected)) allConnectedAtMs = nowMs
  }, tickMs)
}

function acknowledged(dueAt: number): void {
  if (onNextAcknowledgement.length > 0) {
    const atMs = originMs + performance.now()
    for (const tell of onNextAcknowledgement) tell(atMs)
    onNextAcknowledgement = []
  }
  if (dueAt >= measuredFrom) delays.push(performance.now() - dueAt)
}

function summary(): Delays {
  const now = performance.now()
  const waiting = boxes.flatMap((box) => [...box.waiting()].filter((dueAt) => dueAt >= measuredFrom))
  const all = [...delays, ...waiting.map((dueAt) => now - dueAt)].sort((a, b) => a - b)
  const at = (share: number) => all[Math.min(all.length - 1, Math.floor(share * all.length))] ?? 0
  return {
    count: all.length,
    median: at(0.5),
    p99: at(0.99),
    longest: all.at(-1) ?? 0,
    waiting: waiting.length,
  }
}

function counts(): FleetCounts {
  const all = boxes.map((box) => box.counts())
  const sum = (of: (one: (typeof all)[number]) => number) => all.reduce((total, one) => total + of(one), 0)
  return {
    atMs: originMs + performance.now(),
    boxes: boxes.length,
    connected: sum(({ connected }) => Number(connected)),
    due: sum(({ due }) => due),
    sent: sum(({ sent }) => sent),
    acknowledged: sum((one) => one.acknowledged),
    sentAgain: sum(({ sentAgain }) => sentAgain),
    lost: sum(({ lost }) => lost),
    turnedAway: sum(({ turnedAway }) => turnedAway),
    overtaken: sum(({ overtaken }) => overtaken),
    pings: sum(({ pings }) => pings),
    longestPingMs: Math.max(0, ...all.map(({ longestPingMs }) => longestPingMs)),
    allConnectedAtMs,
  }
}
