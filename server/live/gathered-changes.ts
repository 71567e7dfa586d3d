import type { LiveChanges, ReadingTuple } from '#shared/contract/live.ts'

/** Changes of a room that the next frame will carry. */
export interface GatheredChanges {
  add(changes: LiveChanges): void
  isEmpty(): boolean
  /** What was gathered, in one; nothing is left. */
  take(): LiveChanges
}

/** A frame carries at most so many readings of a channel, the newest: the rest is history, and comes over HTTP. */
const readingsPerChannel = 10

/** Gathers changes so that each thing is sent once a frame, as it is now. */
export function createGatheredChanges(): GatheredChanges {
  let readings = new Map<number, ReadingTuple[]>()
  let things = emptyThings()

  return {
    add: (changes) => {
      for (const reading of changes.readings ?? []) {
        const ofChannel = readings.get(reading[0])
        if (ofChannel) insert(ofChannel, reading)
        else readings.set(reading[0], [reading])
      }
      for (const cooker of changes.cookers ?? []) things.cookers.set(cooker.id, cooker)
      for (const piece of changes.pieces ?? []) things.pieces.set(piece.id, piece)
      for (const device of changes.devices ?? []) things.devices.set(device.id, device)
      for (const service of changes.services ?? []) things.services.set(service.id, service)
      for (const forecast of changes.forecasts ?? []) things.forecasts.set(forecast.pieceId, forecast)
      for (const event of changes.events ?? []) things.events.set(event.id, event)
    },
    isEmpty: () => readings.size === 0 && Object.values(things).every((map) => map.size === 0),
    take: () => {
      const changes: LiveChanges = {
        ...(readings.size > 0 && { readings: [...readings.values()].flat() }),
        ...(things.cookers.size > 0 && { cookers: [...things.cookers.values()] }),
        ...(things.pieces.size > 0 && { pieces: [...things.pieces.values()] }),
        ...(things.devices.size > 0 && { devices: [...things.devices.values()] }),
        ...(things.services.size > 0 && { services: [...things.services.values()] }),
        ...(things.forecasts.size > 0 && { forecasts: [...things.forecasts.values()] }),
        ...(things.events.size > 0 && { events: [...things.events.values()] }),
      }
      readings = new Map()
      things = emptyThings()
      return changes
    },
  }
}

type Item<K extends keyof LiveChanges> = NonNullable<LiveChanges[K]>[number]

function emptyThings() {
  return {
    cookers: new Map<number, Item<'cookers'>>(),
    pieces: new Map<number, Item<'pieces'>>(),
    devices: new Map<number, Item<'devices'>>(),
    services: new Map<number, Item<'services'>>(),
    forecasts: new Map<number, Item<'forecasts'>>(),
    events: new Map<string, Item<'events'>>(),
  }
}

/** In order of time; the oldest goes when there are too many. */
function insert(ofChannel: ReadingTuple[], reading: ReadingTuple): void {
  let place = ofChannel.length
  while (place > 0 && (ofChannel[place - 1]?.[1] ?? -Infinity) > reading[1]) place--
  if (place === 0 && ofChannel.length >= readingsPerChannel) return
  ofChannel.splice(place, 0, reading)
  if (ofChannel.length > readingsPerChannel) ofChannel.shift()
}
