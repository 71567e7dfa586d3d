export const cook = {}
