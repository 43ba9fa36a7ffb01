import { unstable_rethrow } from "next/navigation";
import type { z } from "zod";
import { requireActor, type Actor, type RoleSpec } from "@/lib/auth/actor";
import { toProblem } from "./problem";

export type ActionResult<T> =
  { ok: true; value: T } | { ok: false; message: string; fields: Record<string, string> };

type Spec<S> = { role: RoleSpec; input: S };

/**
 * The wrapper of every server action: authenticate, authorise, parse, call one use case. Takes a FormData
 * or a plain object; expected failures and wrong input come back as values, `redirect()` passes through,
 * and a bug is logged and answered without its details.
 */
export function action<S extends z.ZodType, T>(
  spec: Spec<S>,
  work: (call: { actor: Actor; input: z.output<S> }) => T | Promise<T>,
): (previous: ActionResult<T> | null, form: FormData | z.input<S>) => Promise<ActionResult<T>> {
  return async (_previous, form) => {
    try {
      const actor = await requireActor(spec.role);
      const input = spec.input.parse(form instanceof FormData ? fromForm(form) : form);
      return { ok: true, value: await work({ actor, input }) };
    } catch (error) {
      unstable_rethrow(error);
      const problem = toProblem(error);
      const fields = (problem.errors ?? []).map(({ pointer, detail }) => [pointer.slice(1), detail] as const);
      return { ok: false, message: problem.detail, fields: Object.fromEntries(fields) };
    }
  };
}

/** Form fields as an object; a name that ends in [] collects all its values. */
function fromForm(form: FormData): Record<string, unknown> {
  const result: Record<string, unknown> = {};
  for (const name of new Set(form.keys())) {
    if (name.startsWith("$ACTION")) continue;
    result[name.replace(/\[\]$/, "")] = name.endsWith("[]") ? form.getAll(name) : form.get(name);
  }
  return result;
}
