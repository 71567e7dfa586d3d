import type { Problem } from '#shared/contract/common.ts'

export type FieldError = NonNullable<Problem['errors']>[number]

/** An error that the caller may know about: answered as RFC 9457 problem details with this status. */
export class HttpProblem extends Error {
  constructor(
    readonly status: number,
    readonly title: string,
    detail?: string,
    readonly errors?: FieldError[],
  ) {
    super(detail ?? title)
    this.name = 'HttpProblem'
    this.detail = detail
  }
  readonly detail: string | undefined
}

export const badRequest = (detail: string, errors?: FieldError[]) =>
  new HttpProblem(400, 'That request cannot be read', detail, errors)
export const unauthorized = (detail = 'Sign in first.') => new HttpProblem(401, 'Not signed in', detail)
export const forbidden = (detail = 'Your role at this site does not allow that.') =>
  new HttpProblem(403, 'Not allowed', detail)
export const notFound = (detail = 'There is nothing here, or you may not see it.') =>
  new HttpProblem(404, 'Not found', detail)
export const conflict = (detail: string, errors?: FieldError[]) =>
  new HttpProblem(409, 'That does not fit with what is there', detail, errors)
export const staleVersion = (
  detail = 'Somebody changed this since you opened it. Look again, then change it.',
) => new HttpProblem(412, 'Changed meanwhile', detail)
export const versionRequired = () =>
  new HttpProblem(428, 'Version missing', 'Name the version you saw in an If-Match header.')
export const unprocessable = (detail: string, errors?: FieldError[]) =>
  new HttpProblem(422, 'That cannot be done', detail, errors)
export const tooMany = (detail: string) => new HttpProblem(429, 'Too many tries', detail)
export const unavailable = (detail: string) => new HttpProblem(503, 'Not available just now', detail)
