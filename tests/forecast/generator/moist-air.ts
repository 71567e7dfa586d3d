/** Saturation pressure of water in Pa at a temperature in °C: Magnus form, within 0.5 % from 0 to 100 °C (from memory). */
export function saturationPa(celsius: number): number {
  return 610.94 * Math.exp((17.625 * celsius) / (celsius + 243.04))
}
