/** The frame around the pages. */
export const frame = {
  title: {
    signIn: 'Sign in',
    wall: 'Wall',
    tonight: 'Tonight',
    pieces: 'Pieces',
    piece: 'Piece',
    start: 'Start a piece',
    cookers: 'Cookers',
    devices: 'Devices',
    notFound: 'Not here',
  },
  skip: 'Skip to the page',
  navigation: 'Pages',
  site: 'Site',
  you: 'You: {name}',
  units: 'Units',
  unit: { us: '°F and lb', si: '°C and kg' },
  theme: 'Look',
  themeName: { night: 'Night', paper: 'Paper', system: 'As the device' },
  language: 'Language',
  languageName: { en: 'English', es: 'Español' },
  signOut: 'Sign out',
  notFound: {
    heading: 'There is nothing at this address',
    body: 'It may have been moved, or you may not see it with your role.',
    back: 'Go to tonight',
  },
  noSite: {
    heading: 'No site yet',
    body: 'Your account is not on any site. Ask the owner to add you to one.',
  },
  broken: {
    heading: 'This page stopped working',
    body: 'What was stored is safe. Load the page again.',
    again: 'Load again',
  },
}
