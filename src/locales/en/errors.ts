/** What went wrong, in words; by the kinds of api/api-problem.ts. */
export const errors = {
  offline: 'The server cannot be reached. Check the network, then try again.',
  'signed-out': 'You are not signed in any more.',
  forbidden: 'Your role at this site does not allow that.',
  'not-found': 'It is not there, or you may not see it.',
  conflict: 'That does not fit with what is there now.',
  invalid: 'That cannot be taken as it is.',
  'too-many': 'Too many tries. Wait a little, then try again.',
  server: 'The server has a problem. What you entered was not stored.',
  unreadable: 'The server’s answer cannot be read. Load the page again.',
  unknown: 'Something went wrong on this page. Load it again.',
  field: {
    required: 'Fill this in.',
    tooSmall: 'At least {minimum}.',
    above: 'More than {minimum}.',
    tooBig: 'At most {maximum}.',
    tooLong: 'At most {maximum} characters.',
    email: "Write the address like name{'@'}example.com.",
    bandOrder: 'The low end must lie below the high end.',
    form: 'Check this field.',
  },
}
