/**
 * Saturation pressure of water vapour, in Pa, over liquid water above the triple point and over ice below.
 *
 * Hyland and Wexler's equations as printed in ASHRAE Fundamentals 2017, chapter 1, equations 5 and 6
 * (coefficients from memory, checked against psychrolib and the handbook's values in the reference tests).
 * Holds from −100 to 200 °C.
 */
export function saturationPressurePa(temperatureC: number): number {
  const kelvin = temperatureC + 273.15
  if (temperatureC <= TRIPLE_POINT_C) {
    return Math.exp(
      -5.6745359e3 / kelvin +
        6.3925247 -
        9.677843e-3 * kelvin +
        6.2215701e-7 * kelvin ** 2 +
        2.0747825e-9 * kelvin ** 3 -
        9.484024e-13 * kelvin ** 4 +
        4.1635019 * Math.log(kelvin),
    )
  }
  return Math.exp(
    -5.8002206e3 / kelvin +
      1.3914993 +
      kelvin * (-4.8640239e-2 + kelvin * (4.1764768e-5 - kelvin * 1.4452093e-8)) +
      6.5459673 * Math.log(kelvin),
  )
}

/** Relative slope of the saturation pressure over water, d ln p / dT, in 1/K: for Newton steps above 0 °C. */
export function saturationSlopePerK(temperatureC: number): number {
  const kelvin = temperatureC + 273.15
  return (
    5.8002206e3 / (kelvin * kelvin) -
    4.8640239e-2 +
    kelvin * (2 * 4.1764768e-5 - 3 * 1.4452093e-8 * kelvin) +
    6.5459673 / kelvin
  )
}

const TRIPLE_POINT_C = 0.01
