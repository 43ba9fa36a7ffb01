import { ZodError } from "zod";
import { AppError, STATUS_OF, type ErrorCode } from "@/lib/errors";
import { log } from "@/lib/log";

const TITLES: Record<ErrorCode, string> = {
  unauthenticated: "Sign in first",
  forbidden: "Not allowed",
  not_found: "Not found",
  conflict: "Conflict",
  gone: "No longer there",
  too_large: "Too large",
  invalid: "Not valid",
  rate_limited: "Too many requests",
  payment_failed: "Payment failed",
  upstream: "A service behind this one failed",
};

export type Problem = {
  type: string;
  title: string;
  status: number;
  detail: string;
  errors?: { pointer: string; detail: string }[];
  requestId?: string;
};

/** The RFC 9457 problem details of any error. A bug is logged whole under the id that the answer carries. */
export function toProblem(error: unknown): Problem {
  if (error instanceof ZodError) {
    return {
      type: "/problems/invalid",
      title: TITLES.invalid,
      status: 422,
      detail: error.issues[0]?.message ?? "The request is not valid.",
      errors: error.issues.map((issue) => ({ pointer: `/${issue.path.join("/")}`, detail: issue.message })),
    };
  }
  if (error instanceof AppError) {
    const fields = Object.entries(error.fields);
    return {
      type: `/problems/${error.code.replaceAll("_", "-")}`,
      title: TITLES[error.code],
      status: STATUS_OF[error.code],
      detail: error.message,
      ...(fields.length > 0 && { errors: fields.map(([name, detail]) => ({ pointer: `/${name}`, detail })) }),
    };
  }
  const requestId = crypto.randomUUID();
  log().error({ err: error, requestId }, "unexpected error");
  return {
    type: "/problems/bug",
    title: "Something broke on our side",
    status: 500,
    detail: `It has been noted. Quote ${requestId} if you write to us.`,
    requestId,
  };
}

export function problemResponse(error: unknown): Response {
  const problem = toProblem(error);
  return Response.json(problem, {
    status: problem.status,
    headers: { "content-type": "application/problem+json", "cache-control": "no-store" },
  });
}
