export const signIn = {
  heading: 'Sign in',
  lead: 'Every pit on one clock, and hours of warning before a piece needs hands.',
  email: 'E-mail',
  password: 'Password',
  submit: 'Sign in',
  busy: 'Signing in …',
  demo: {
    heading: 'This is the demo house',
    body: 'Its pits and its crew are simulated. Come in as one of them:',
    enter: 'Sign in as {name}',
    password: 'The password of all of them: {password}',
  },
}
