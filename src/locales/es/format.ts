export const format = {
  today: 'hoy',
  justNow: 'ahora mismo',
  ago: 'hace {span}',
  underMinute: 'menos de 1 min',
  minutes: '{minutes} min',
  hours: '{hours} h {minutes}',
  days: '{days} d {hours} h',
  interval: '{from} a {to}',
  forecast: '{median}, de {span}',
}
