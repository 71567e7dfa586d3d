import { livePath } from '#shared/contract/live.ts'
import { maxPayloadBytes, readingsTopic, statusTopic } from '#shared/contract/mqtt.ts'
import { senmlUnits } from '#shared/contract/senml.ts'

/** What the API page says before the list of endpoints. */
export const apiDescription = `
Runs the overnight cook of a barbecue house: cookers, pieces, probes, readings, events and forecasts.

**Form.** JSON; times are RFC 3339 and answered in UTC; temperatures are °C, masses kg. Errors are problem details
(RFC 9457) with \`errors\` for single fields. Lists that may be long come in pages: send \`nextCursor\` back as
\`cursor\`. What two people may edit carries an \`ETag\`, which a change names in \`If-Match\`.

**Signing in.** \`POST /api/session\` gives an access token for 15 minutes and sets a cookie that
\`POST /api/session/refresh\` turns into the next one. What a person may do depends on their roles at the site.

**Devices over MQTT 3.1.1.** A device signs in with its user name and secret and publishes with QoS 1 to
\`${readingsTopic('{site}', '{device}')}\`: a SenML pack (RFC 8428, JSON) of at most ${maxPayloadBytes / 1024} kB whose
record names are channel numbers. Units: ${senmlUnits.map((unit) => `\`${unit}\``).join(', ')}; \`battery\` is sent in
\`%EL\` and \`signal\` in \`dBm\`. The PUBACK goes out once the readings are stored; channel and time identify a reading,
so sending it again does no harm. A record without a time gets the time of receipt and cannot be told from a second one.
\`${statusTopic('{site}', '{device}')}\` is retained and says \`online\` or, by last will, \`offline\`. Devices without
MQTT send the same pack to \`POST /api/readings\`.

**Live changes.** A WebSocket at \`${livePath}\` gives what changes at a site. Say \`hello\` within five seconds with a
ticket from \`POST /api/live/ticket\`, then \`subscribe\` to a site: a \`snapshot\` comes, then a \`delta\` at most five
times a second. Frames are numbered within an \`epoch\`; whoever missed one asks for a \`snapshot\`. The messages are the
schemas \`LiveClientMessage\` and \`LiveServerMessage\`.
`.trim()
