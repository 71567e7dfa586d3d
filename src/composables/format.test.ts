import { describe, expect, it } from 'vitest'
import { createTexts } from '@/locales/index.ts'
import { createFormat, type FormatOptions } from './format.ts'

/** Spaces inside values do not break; tests read them as plain ones. */
function plain(text: string): string {
  return text.replaceAll('\u00a0', ' ')
}

function formatFor(options: Partial<Omit<FormatOptions, 'words'>> = {}) {
  const locale = options.locale ?? 'en-US'
  const texts = createTexts(locale.startsWith('es') ? 'es' : 'en').global
  return createFormat({
    locale,
    units: 'us',
    timeZone: 'America/Chicago',
    // 22:00 on Monday 30 November 2026 in Chicago (UTC-6).
    now: () => Date.parse('2026-12-01T04:00:00Z'),
    words: (key, values) => texts.t(key, values ?? {}),
    ...options,
  })
}

describe('temperatures', () => {
  it('are shown in the person’s unit', () => {
    expect(plain(formatFor().temperature(95))).toBe('203 °F')
    expect(plain(formatFor({ units: 'si' }).temperature(95))).toBe('95 °C')
    expect(plain(formatFor({ units: 'si' }).temperature(95.04, { digits: 1, unit: false }))).toBe('95.0')
  })

  it('show a dash where there is none, and never minus zero', () => {
    expect(formatFor().temperature(null)).toBe('–')
    expect(plain(formatFor({ units: 'si' }).temperature(-0.2))).toBe('0 °C')
  })

  it('have differences with a sign and without an offset', () => {
    expect(plain(formatFor().temperatureDifference(10))).toBe('+18 °F')
    expect(plain(formatFor().temperatureDifference(-10, { unit: false }))).toBe('−18')
    expect(plain(formatFor().temperatureDifference(0.01))).toBe('0 °F')
  })

  it('name the unit of a span once', () => {
    expect(plain(formatFor().temperatureSpan(115, 130))).toBe('239 to 266 °F')
  })
})

describe('masses and numbers', () => {
  it('follow unit and language', () => {
    expect(plain(formatFor().mass(6.8))).toBe('15.0 lb')
    expect(plain(formatFor({ units: 'si', locale: 'es-ES' }).mass(6.83))).toBe('6,8 kg')
    expect(plain(formatFor().percent(0.617))).toBe('62 %')
  })
})

describe('clock times', () => {
  it('are the site’s, in 24 h, and name the day only when it is not today', () => {
    expect(plain(formatFor().clock('2026-12-01T04:35:00Z'))).toBe('22:35')
    expect(plain(formatFor().clock('2026-12-01T10:35:00Z'))).toBe('Tue 04:35')
    expect(plain(formatFor().clock('2026-11-20T10:35:00Z'))).toBe('Nov 20 04:35')
    expect(plain(formatFor().clock('2026-12-01T10:35:00Z', { day: 'never' }))).toBe('04:35')
    expect(plain(formatFor().clock('2026-12-01T04:35:00Z', { day: 'always' }))).toBe('today 22:35')
  })

  it('write midnight as 00:00', () => {
    expect(formatFor().clock('2026-12-01T06:00:00Z', { day: 'never' })).toBe('00:00')
  })

  it('tell the two 01:30 of a clock-change night apart by their zone', () => {
    const format = formatFor()
    // Chicago leaves daylight saving time on 1 November 2026 at 02:00 (tz database).
    expect(format.clock('2026-11-01T06:30:00Z', { day: 'never' })).toBe('01:30')
    expect(format.clock('2026-11-01T07:30:00Z', { day: 'never' })).toBe('01:30')
    expect(format.zone('2026-11-01T06:30:00Z')).toBe('CDT')
    expect(format.zone('2026-11-01T07:30:00Z')).toBe('CST')
  })
})

describe('durations', () => {
  it.each([
    [-5, 'under 1 min'],
    [59_000, 'under 1 min'],
    [45 * 60_000, '45 min'],
    [130 * 60_000, '2 h 10'],
    [9 * 3_600_000 + 5 * 60_000, '9 h 05'],
    [26 * 3_600_000, '26 h 00'],
    [76 * 3_600_000, '3 d 4 h'],
  ])('of %d ms read %s', (ms, text) => {
    expect(formatFor().duration(ms)).toBe(text)
  })

  it('read as ages', () => {
    expect(formatFor().ago(5 * 60_000)).toBe('5 min ago')
    expect(formatFor({ locale: 'es-US' }).ago(5 * 60_000)).toBe('hace 5 min')
    expect(formatFor().ago(3000)).toBe('just now')
  })
})

describe('forecasts', () => {
  const reach = { p10: '2026-12-01T10:10:00Z', p50: '2026-12-01T10:35:00Z', p90: '2026-12-01T11:20:00Z' }

  it('read as a median and an interval, naming a day once', () => {
    expect(plain(formatFor().forecast(reach))).toBe('Tue 04:35, 04:10 to 05:20')
    expect(plain(formatFor({ now: () => Date.parse('2026-12-01T08:00:00Z') }).forecast(reach))).toBe(
      '04:35, 04:10 to 05:20',
    )
    expect(plain(formatFor({ locale: 'es-US', now: () => Date.parse(reach.p10) }).forecast(reach))).toBe(
      '04:35, de 04:10 a 05:20',
    )
  })

  it('name the days when the interval crosses midnight', () => {
    const crossing = { p10: '2026-12-01T05:20:00Z', p50: '2026-12-01T05:50:00Z', p90: '2026-12-01T06:40:00Z' }
    expect(plain(formatFor().forecast(crossing))).toBe('23:50, 23:20 to Tue 00:40')
    const earlier = { ...crossing, p50: '2026-12-01T06:05:00Z' }
    expect(plain(formatFor().forecast(earlier))).toBe('Tue 00:05, today 23:20 to Tue 00:40')
  })
})

describe('what a person writes', () => {
  it('comes back in SI', () => {
    expect(formatFor().celsius(203)).toBeCloseTo(95, 9)
    expect(formatFor().kilograms(10)).toBeCloseTo(4.5359237, 9)
    expect(formatFor({ units: 'si' }).kilograms(10)).toBe(10)
  })
})
