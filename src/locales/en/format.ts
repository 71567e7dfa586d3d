/** How values are put into words; used by composables/format.ts alone. */
export const format = {
  today: 'today',
  justNow: 'just now',
  ago: '{span} ago',
  underMinute: 'under 1 min',
  minutes: '{minutes} min',
  hours: '{hours} h {minutes}',
  days: '{days} d {hours} h',
  interval: '{from} to {to}',
  forecast: '{median}, {span}',
}
