/** The part of psychrolib that the checks use; the package ships no types. */
declare module 'psychrolib' {
  interface Psychrometrics {
    SI: number
    SetUnitSystem(system: number): void
    GetSatVapPres(temperatureC: number): number
    GetTWetBulbFromHumRatio(airC: number, ratio: number, pressurePa: number): number
    GetTWetBulbFromRelHum(airC: number, relativeHumidity: number, pressurePa: number): number
    GetStandardAtmPressure(elevationM: number): number
  }
  const psychrolib: Psychrometrics
  export default psychrolib
}
