import {
  celsiusFrom,
  kilogramsFrom,
  massIn,
  temperatureDifferenceIn,
  temperatureIn,
  type UnitSystem,
} from '@/shared/domain/units.ts'

/** A moment as it stands in the contract (RFC 3339) or as milliseconds since 1970 UTC. */
export type Moment = string | number

/** The three quantiles that a forecast is read by. */
export interface ReachMoments {
  p10: Moment
  p50: Moment
  p90: Moment
}

/** `auto` names the day only when it is not today's at the site. */
export type DayNaming = 'auto' | 'never' | 'always'

/** Everything a person reads goes through here. Values in are SI; spaces inside a value do not break. */
export interface Format {
  readonly units: UnitSystem
  readonly timeZone: string
  /** `°F` or `°C`. */
  readonly temperatureUnit: string
  /** `lb` or `kg`. */
  readonly massUnit: string
  /** °C in: `203 °F`; `–` when null. `unit: false` leaves the unit out. */
  temperature(celsius: number | null, options?: { unit?: boolean; digits?: number }): string
  /** A span of temperatures: `240 to 265 °F`. */
  temperatureSpan(lowC: number, highC: number): string
  /** A difference in K with its sign: `+5 °F`. */
  temperatureDifference(kelvin: number, options?: { unit?: boolean; digits?: number }): string
  /** kg in: `14.2 lb`; `–` when null. */
  mass(kilograms: number | null, options?: { unit?: boolean; digits?: number }): string
  /** A share of one: `62 %`. */
  percent(share: number | null): string
  number(value: number, digits?: number): string
  /** Clock time at the site, 24 h: `04:35`, or `Sun 04:35` when it is not today's. */
  clock(at: Moment, options?: { day?: DayNaming }): string
  /** `today`, `Sun` within the coming week, else `Nov 12`. */
  day(at: Moment): string
  /** Day, month and year, with the clock: `Nov 12, 2026, 04:35`. */
  date(at: Moment): string
  /** The zone's short name at that moment, such as `CDT`: tells the two 01:30 of a clock-change night apart. */
  zone(at: Moment): string
  /** Milliseconds in: `2 h 10`, `45 min`, `under 1 min`, `3 d 4 h`. Never negative. */
  duration(ms: number): string
  /** `5 min ago`, or `just now`. */
  ago(ms: number): string
  /** From one moment to another: `04:10 to 05:20`. */
  interval(from: Moment, to: Moment): string
  /** A forecast: `04:35, 04:10 to 05:20`; the interval is skewed, so never plus-or-minus. */
  forecast(reach: ReachMoments): string
  /** °C in, the bare number a person reads, for inputs. */
  temperatureNumber(celsius: number): number
  /** The bare number a person wrote, °C out. */
  celsius(shown: number): number
  massNumber(kilograms: number): number
  kilograms(shown: number): number
}

export interface FormatOptions {
  locale: string
  units: UnitSystem
  /** IANA name of the site's zone. */
  timeZone: string
  /** The present, for telling today's times from others. */
  now(): number
  /** Words of the person's language, by key. */
  words: (key: string, values?: Record<string, string | number>) => string
}

const minute = 60_000
const hour = 60 * minute
const day = 24 * hour
/** A space that never breaks a line: between a number and its unit. */
const tied = '\u00a0'
const missing = '–'

/** Builds the one formatter of everything shown, for a person's units and language and a site's clock. */
export function createFormat(options: FormatOptions): Format {
  const { units, timeZone, words } = options
  const temperatureUnit = units === 'us' ? '°F' : '°C'
  const massUnit = units === 'us' ? 'lb' : 'kg'
  const calendar = siteCalendar(options.locale, timeZone)

  const number = (value: number, digits = 0) => plainNumber(options.locale, value, digits)
  const withUnit = (value: string, unit: string, shown = true) => (shown ? value + tied + unit : value)

  const dayName = (at: number): string => {
    const away = calendar.dayNumber(at) - calendar.dayNumber(options.now())
    if (away === 0) return words('format.today')
    return away >= -2 && away <= 6 ? calendar.weekday(at) : calendar.monthDay(at)
  }
  const clock = (at: number, naming: DayNaming): string => {
    const today = calendar.dayNumber(at) === calendar.dayNumber(options.now())
    const named = naming === 'always' || (naming === 'auto' && !today)
    return named ? dayName(at) + tied + calendar.clock(at) : calendar.clock(at)
  }
  /** `from` to `to`, where a day is named again only when it changes from the one named before. */
  const interval = (from: number, to: number, saidDay: number): string =>
    words('format.interval', {
      from: clock(from, calendar.dayNumber(from) === saidDay ? 'never' : 'always'),
      to: clock(to, calendar.dayNumber(to) === calendar.dayNumber(from) ? 'never' : 'always'),
    })

  return {
    units,
    timeZone,
    temperatureUnit,
    massUnit,
    temperature: (celsius, { unit, digits } = {}) =>
      celsius === null
        ? missing
        : withUnit(number(temperatureIn(units, celsius), digits), temperatureUnit, unit),
    temperatureSpan: (lowC, highC) =>
      words('format.interval', {
        from: number(temperatureIn(units, lowC)),
        to: withUnit(number(temperatureIn(units, highC)), temperatureUnit),
      }),
    temperatureDifference: (kelvin, { unit, digits } = {}) =>
      withUnit(signed(number, temperatureDifferenceIn(units, kelvin), digits), temperatureUnit, unit),
    mass: (kilograms, { unit, digits = 1 } = {}) =>
      kilograms === null ? missing : withUnit(number(massIn(units, kilograms), digits), massUnit, unit),
    percent: (share) => (share === null ? missing : withUnit(number(share * 100), '%')),
    number,
    clock: (at, { day: naming = 'auto' } = {}) => clock(toMs(at), naming),
    day: (at) => dayName(toMs(at)),
    date: (at) => calendar.fullDate(toMs(at)),
    zone: (at) => calendar.zone(toMs(at)),
    duration: (ms) => duration(ms, words),
    ago: (ms) => (ms < minute ? words('format.justNow') : words('format.ago', { span: duration(ms, words) })),
    interval: (from, to) => interval(toMs(from), toMs(to), calendar.dayNumber(options.now())),
    forecast: (reach) => {
      const median = toMs(reach.p50)
      const span = interval(toMs(reach.p10), toMs(reach.p90), calendar.dayNumber(median))
      return words('format.forecast', { median: clock(median, 'auto'), span })
    },
    temperatureNumber: (celsius) => temperatureIn(units, celsius),
    celsius: (shown) => celsiusFrom(units, shown),
    massNumber: (kilograms) => massIn(units, kilograms),
    kilograms: (shown) => kilogramsFrom(units, shown),
  }
}

function toMs(at: Moment): number {
  return typeof at === 'number' ? at : Date.parse(at)
}

function duration(ms: number, words: FormatOptions['words']): string {
  const whole = Math.max(0, Math.floor(ms / minute))
  if (whole < 1) return words('format.underMinute')
  if (whole < 60) return words('format.minutes', { minutes: whole })
  if (ms < 2 * day) {
    const minutes = String(whole % 60).padStart(2, '0')
    return words('format.hours', { hours: Math.floor(whole / 60), minutes })
  }
  const hours = Math.floor(ms / hour)
  return words('format.days', { days: Math.floor(hours / 24), hours: hours % 24 })
}

function signed(number: Format['number'], value: number, digits = 0): string {
  const size = number(Math.abs(value), digits)
  if (Number(Math.abs(value).toFixed(digits)) === 0) return size
  return (value < 0 ? '−' : '+') + size
}

function plainNumber(locale: string, value: number, digits: number): string {
  return numberFormat(locale, digits).format(value)
}

const numberFormats = new Map<string, Intl.NumberFormat>()

function numberFormat(locale: string, digits: number): Intl.NumberFormat {
  const key = `${locale} ${digits}`
  const known = numberFormats.get(key)
  if (known !== undefined) return known
  const made = new Intl.NumberFormat(locale, {
    minimumFractionDigits: digits,
    maximumFractionDigits: digits,
    useGrouping: 'min2',
    // A reading of −0.3 °F must not be shown as "−0".
    signDisplay: 'negative',
  })
  numberFormats.set(key, made)
  return made
}

/** The site's calendar and clock in a person's language. Intl's formatters are slow to make, so they are made once. */
function siteCalendar(locale: string, timeZone: string) {
  const at = (language: string, parts: Intl.DateTimeFormatOptions) =>
    new Intl.DateTimeFormat(language, { ...parts, timeZone })
  const clock = at('en-GB', { hour: '2-digit', minute: '2-digit', hourCycle: 'h23' })
  // The Swedish form is YYYY-MM-DD.
  const isoDay = at('sv-SE', { year: 'numeric', month: '2-digit', day: '2-digit' })
  const weekday = at(locale, { weekday: 'short' })
  const monthDay = at(locale, { month: 'short', day: 'numeric' })
  const fullDate = at(locale, {
    year: 'numeric',
    month: 'short',
    day: 'numeric',
    hour: '2-digit',
    minute: '2-digit',
    hourCycle: 'h23',
  })
  const zone = at('en-US', { timeZoneName: 'short', hour: '2-digit' })
  return {
    clock: (ms: number) => clock.format(ms),
    /** Days since 1970 of the site's calendar day. */
    dayNumber: (ms: number) => Math.round(Date.parse(`${isoDay.format(ms)}T00:00:00Z`) / day),
    weekday: (ms: number) => weekday.format(ms),
    monthDay: (ms: number) => monthDay.format(ms),
    fullDate: (ms: number) => fullDate.format(ms),
    zone: (ms: number) => zone.formatToParts(ms).find((part) => part.type === 'timeZoneName')?.value ?? '',
  }
}
