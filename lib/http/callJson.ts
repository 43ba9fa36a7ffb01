/** A problem that the server told (RFC 9457), or that it could not be reached (status 0). */
export class CallError extends Error {
  override readonly name = "CallError";
  constructor(
    readonly status: number,
    message: string,
  ) {
    super(message);
  }
}

/** Calls one of our own endpoints from the browser. Throws CallError with a message that can be shown. */
export async function callJson<T>(
  method: "GET" | "POST" | "PUT" | "DELETE",
  url: string,
  body?: unknown,
): Promise<T> {
  let answer: Response;
  try {
    answer = await fetch(url, {
      method,
      ...(body !== undefined && {
        headers: { "content-type": "application/json" },
        body: JSON.stringify(body),
      }),
    });
  } catch (cause) {
    throw Object.assign(new CallError(0, "The network is away."), { cause });
  }
  const value = (await answer.json().catch(() => ({}))) as T & { detail?: string };
  if (!answer.ok) throw new CallError(answer.status, value.detail ?? "That did not work.");
  return value;
}
