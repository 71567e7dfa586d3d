import type { Cooker } from '@/shared/contract/cooker.ts'
import type { Device } from '@/shared/contract/device.ts'
import type { Piece } from '@/shared/contract/piece.ts'
import type { SilentSource } from '@/shared/domain/next-actions.ts'
import type { Freshness, LatestValue } from '@/stores/live-types.ts'
import { firstWordMs, moment } from './lane-piece.ts'

/** A channel that something depends on tonight. */
interface Watched {
  channelId: number
  name: string
  pieceId: number | null
  cookerId: number | null
}

/**
 * What is silent and matters: channels of cooking pieces and of pits that are in use. Where a whole device is
 * silent it is named once, not each of its probes: one cause, one thing to do.
 */
export function silentSources(night: {
  cookers: readonly Cooker[]
  pieces: readonly Piece[]
  devices: readonly Device[]
  inUse: (cookerId: number) => boolean
  freshnessOf: (channelId: number) => Freshness
  latest: ReadonlyMap<number, LatestValue>
  now: number
}): SilentSource[] {
  const watched = [...pitsOf(night), ...piecesOf(night)]
  const silent = watched.filter(({ channelId }) => night.freshnessOf(channelId).stale)
  const lastOf = ({ channelId }: Watched) => night.latest.get(channelId)?.at ?? null
  const deviceOf = ({ channelId }: Watched) =>
    night.devices.find((device) => device.channels.some((channel) => channel.id === channelId))

  const dead = night.devices.filter((device) => {
    const own = watched.filter((each) => deviceOf(each) === device)
    return own.length > 1 && own.every((each) => silent.includes(each))
  })
  const wholes = dead.map((device): SilentSource => {
    const heard = silent.filter((each) => deviceOf(each) === device).map(lastOf)
    const times = heard.filter((at) => at !== null)
    return {
      key: `device-${device.id}`,
      name: device.name,
      lastAt: times.length > 0 ? Math.max(...times) : null,
      pieceId: null,
      cookerId: null,
    }
  })
  const singles = silent
    .filter((each) => !dead.some((device) => device === deviceOf(each)))
    .map((each): SilentSource => ({
      key: `channel-${each.channelId}`,
      name: each.name,
      lastAt: lastOf(each),
      pieceId: each.pieceId,
      cookerId: each.cookerId,
    }))
  return [...wholes, ...singles]
}

function pitsOf(night: { cookers: readonly Cooker[]; inUse: (cookerId: number) => boolean }): Watched[] {
  return night.cookers.flatMap((cooker) =>
    cooker.pitChannelId === null || !night.inUse(cooker.id)
      ? []
      : [{ channelId: cooker.pitChannelId, name: cooker.name, pieceId: null, cookerId: cooker.id }],
  )
}

function piecesOf(night: { pieces: readonly Piece[]; now: number }): Watched[] {
  const justOn = (piece: Piece) => night.now - (moment(piece.onAt) ?? night.now) < firstWordMs
  return night.pieces.flatMap((piece) =>
    piece.channelId === null || justOn(piece) || (piece.stage !== 'cooking' && piece.stage !== 'wrapped')
      ? []
      : [{ channelId: piece.channelId, name: piece.label, pieceId: piece.id, cookerId: piece.cookerId }],
  )
}
