/** How a person reads weights and temperatures: °F and lb, or °C and kg. Inside, everything is °C and kg. */
export type UnitSystem = 'us' | 'si'

/** One pound in kilograms, exactly (international avoirdupois pound, 1959). */
export const kilogramsPerPound = 0.45359237

/** °C to °F. */
export function fahrenheitFromCelsius(celsius: number): number {
  return celsius * 1.8 + 32
}

/** °F to °C. */
export function celsiusFromFahrenheit(fahrenheit: number): number {
  return (fahrenheit - 32) / 1.8
}

/** A difference in kelvin to one in °F: no offset. */
export function fahrenheitDifference(kelvin: number): number {
  return kelvin * 1.8
}

/** kg to lb. */
export function poundsFromKilograms(kilograms: number): number {
  return kilograms / kilogramsPerPound
}

/** lb to kg. */
export function kilogramsFromPounds(pounds: number): number {
  return pounds * kilogramsPerPound
}

/** A temperature in °C as the number a person reads. */
export function temperatureIn(units: UnitSystem, celsius: number): number {
  return units === 'us' ? fahrenheitFromCelsius(celsius) : celsius
}

/** The number a person wrote as a temperature, in °C. */
export function celsiusFrom(units: UnitSystem, shown: number): number {
  return units === 'us' ? celsiusFromFahrenheit(shown) : shown
}

/** A difference of temperatures in K as the number a person reads. */
export function temperatureDifferenceIn(units: UnitSystem, kelvin: number): number {
  return units === 'us' ? fahrenheitDifference(kelvin) : kelvin
}

/** A mass in kg as the number a person reads. */
export function massIn(units: UnitSystem, kilograms: number): number {
  return units === 'us' ? poundsFromKilograms(kilograms) : kilograms
}

/** The number a person wrote as a mass, in kg. */
export function kilogramsFrom(units: UnitSystem, shown: number): number {
  return units === 'us' ? kilogramsFromPounds(shown) : shown
}
