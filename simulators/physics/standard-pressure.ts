/**
 * Air pressure at an elevation, Pa, in the standard atmosphere.
 * ASHRAE Fundamentals 2017, chapter 1, equation 3; holds from −5000 to 11000 m.
 */
export function standardPressurePa(elevationM: number): number {
  return 101325 * (1 - 2.25577e-5 * elevationM) ** 5.2559
}
