/** An answer of Stripe's that is not a success (https://docs.stripe.com/api/errors). */
export class StripeError extends Error {
  constructor(
    readonly status: number,
    readonly body: {
      type: string;
      code?: string;
      decline_code?: string;
      message: string;
      param?: string;
      charge?: string;
      payment_intent?: unknown;
    },
    /** Whether an idempotency key keeps it: what was refused before the operation began is not kept. */
    readonly isKept = true,
  ) {
    super(body.message);
  }
}

export const invalid = (message: string, code?: string, param?: string): StripeError =>
  new StripeError(400, {
    type: "invalid_request_error",
    message,
    ...(code && { code }),
    ...(param && { param }),
  });

/** A wrong parameter: refused before anything began, so no idempotency key keeps it. */
export const badParameter = (message: string, param: string, code = "parameter_invalid_empty"): StripeError =>
  new StripeError(400, { type: "invalid_request_error", message, code, param }, false);

export const missingParameter = (param: string): StripeError =>
  badParameter(`Missing required param: ${param}.`, param, "parameter_missing");

export const noSuch = (what: string, id: string, param = "id"): StripeError =>
  new StripeError(404, {
    type: "invalid_request_error",
    code: "resource_missing",
    message: `No such ${what}: '${id}'`,
    param,
  });
