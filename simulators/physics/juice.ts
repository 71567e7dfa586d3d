/**
 * Share of its loose water that meat at a temperature will give up in the end, 0 to 1.
 *
 * Proteins shrink in steps between about 45 and 80 °C; one logistic step stands for them (shape chosen, not
 * measured; the trade sees juice from about 55 °C on).
 */
export function juiceGivenUp(temperatureC: number): number {
  return 1 / (1 + Math.exp(-(temperatureC - MIDDLE_C) / WIDTH_C))
}

const MIDDLE_C = 63
const WIDTH_C = 6.5
