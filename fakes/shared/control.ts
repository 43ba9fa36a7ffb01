import { json, readAll, type Answer, type Call } from "./transport";

type Verb = (input: Record<string, unknown>) => unknown;

/**
 * The endpoints under `/_control/` that tests and the seed drive. A page of another origin cannot reach them,
 * although any page can post to a loopback port: a request that names a foreign origin is refused.
 */
export async function control(call: Call, verbs: Record<string, Verb>): Promise<Answer> {
  const { origin, host } = call.headers;
  if (origin !== undefined && origin !== `http://${host ?? ""}`)
    return json(403, { error: "control is not for other origins" });
  const verb = verbs[call.path.slice("/_control/".length)];
  if (!verb) return json(404, { error: "no such control", known: Object.keys(verbs) });
  try {
    const text = (await readAll(call.body)).toString("utf8");
    const input: unknown = text ? JSON.parse(text) : Object.fromEntries(new URLSearchParams(call.query));
    if (typeof input !== "object" || input === null) throw new RangeError("the body is a JSON object");
    return json(200, (await verb({ ...input })) ?? {});
  } catch (error) {
    if (error instanceof ControlError) return json(error.status, error.body);
    if (error instanceof RangeError || error instanceof SyntaxError)
      return json(400, { error: error.message });
    throw error;
  }
}

/** A control request that cannot be done, with the answer that it gets. */
export class ControlError extends Error {
  constructor(
    readonly status: number,
    readonly body: Record<string, unknown>,
  ) {
    super(`control answered ${status}`);
  }
}
