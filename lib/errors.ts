/** Status of every expected failure; the code is stable and part of the API's problem type. */
export const STATUS_OF = {
  unauthenticated: 401,
  forbidden: 403,
  not_found: 404,
  conflict: 409,
  gone: 410,
  too_large: 413,
  invalid: 422,
  rate_limited: 429,
  payment_failed: 402,
  upstream: 502,
} as const;

export type ErrorCode = keyof typeof STATUS_OF;

/** An expected failure. The message is safe to show to the person who caused it. */
export class AppError extends Error {
  override readonly name = "AppError";
  constructor(
    readonly code: ErrorCode,
    message: string,
    readonly fields: Record<string, string> = {},
    options?: ErrorOptions,
  ) {
    super(message, options);
  }
}

/** A bug: something that cannot be has happened. Logged whole, never shown. */
export class InvariantError extends Error {
  override readonly name = "InvariantError";
}

/** Throws InvariantError unless the condition holds. */
export function invariant(condition: unknown, message: string): asserts condition {
  if (!condition) throw new InvariantError(message);
}
