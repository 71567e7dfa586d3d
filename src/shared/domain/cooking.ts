/** What kind of fire a piece cooks on. */
export const cookerKinds = ['offset', 'cabinet', 'rotisserie', 'kettle', 'holding'] as const
export type CookerKind = (typeof cookerKinds)[number]

/** How a piece is wrapped once its bark is set. */
export const wrapMethods = ['none', 'paper', 'foil', 'boat'] as const
export type WrapMethod = (typeof wrapMethods)[number]

/** The part of the cook a piece is in; `done` once the pull temperature was reached or the piece was pulled. */
export const phases = ['rise', 'stall', 'push', 'wrapped', 'done'] as const
export type Phase = (typeof phases)[number]
