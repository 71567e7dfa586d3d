export { notInFuture } from './not-in-future.ts'
export { asLogged, eventsRepository, type EventToStore, type PitSetChange } from './repository.ts'
export { isSameFact } from './same-fact.ts'
