/** The cook simulator's public face: a piece of meat, the pit it stands in, and what a probe shows of them. */
export { createPieceSimulation, type PieceSimulation, type PieceSurroundings } from './piece-simulation.ts'
export { createPitSimulation, type PitSimulation } from './pit-simulation.ts'
export { drawPieceTraits, cuts, type Cut, type PieceTraits } from './physics/piece-traits.ts'
export { createWeather, type Weather } from './physics/weather.ts'
