/** What a temperature in a pit, a piece or a holding cabinet can be, in °C. */
export const lowestC = -50
export const highestC = 600

/** How far a device's clock may be ahead, and how old a stored reading may be when it is sent, in ms. */
export const maxAheadMs = 2 * 60 * 1000
export const maxAgeMs = 14 * 24 * 3600 * 1000
