export const chart = {}
