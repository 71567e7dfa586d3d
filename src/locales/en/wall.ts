export const wall = {}
