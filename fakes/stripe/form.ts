import { badParameter, missingParameter } from "./errors";

export type Form = { [name: string]: string | Form };

const DEPTH_MAX = 8;

/** Bracketed fields as nested objects: `a[b][0]=c`, and `a[]=c` counted up. */
export function parseForm(text: string): Form {
  const form: Form = Object.create(null);
  for (const [name, value] of new URLSearchParams(text)) {
    const parts = name.replaceAll("]", "").split("[");
    if (parts.length > DEPTH_MAX || parts.some((part) => part === "__proto__"))
      throw badParameter(`Invalid parameter name: ${name}`, name);
    let at = form;
    parts.forEach((part, index) => {
      const field = part === "" ? String(Object.keys(at).length) : part;
      if (index === parts.length - 1) at[field] = value;
      else {
        const next = at[field];
        at = typeof next === "object" ? next : (at[field] = Object.create(null) as Form);
      }
    });
  }
  return form;
}

/** Typed reading of a form; what does not fit is refused with the parameter's full name. */
export class Params {
  constructor(
    readonly form: Form,
    private readonly path = "",
  ) {}

  private name(field: string): string {
    return this.path === "" ? field : `${this.path}[${field}]`;
  }

  has(field: string): boolean {
    return this.form[field] !== undefined;
  }

  text(field: string): string | undefined {
    const value = this.form[field];
    if (typeof value === "object")
      throw badParameter(`Invalid string: ${this.name(field)}`, this.name(field), "parameter_invalid_string");
    return value;
  }

  required(field: string): string {
    const value = this.text(field);
    if (value === undefined || value === "") throw missingParameter(this.name(field));
    return value;
  }

  optional(field: string): string | null {
    return this.text(field) || null;
  }

  integer(field: string): number | undefined {
    const value = this.text(field);
    if (value === undefined || value === "") return undefined;
    if (!/^-?\d{1,15}$/.test(value))
      throw badParameter(`Invalid integer: ${value}`, this.name(field), "parameter_invalid_integer");
    return Number(value);
  }

  /** A positive amount of minor units. */
  amount(field = "amount"): number {
    const value = this.integer(field);
    if (value === undefined) throw missingParameter(this.name(field));
    return checkAmount(value, this.name(field));
  }

  optionalAmount(field = "amount"): number | undefined {
    return this.integer(field) === undefined ? undefined : this.amount(field);
  }

  flag(field: string): boolean | undefined {
    const value = this.text(field);
    if (value === undefined || value === "") return undefined;
    if (value !== "true" && value !== "false")
      throw badParameter(`Invalid boolean: ${value}`, this.name(field), "parameter_invalid_boolean");
    return value === "true";
  }

  choice<T extends string>(field: string, choices: readonly T[]): T | undefined {
    const value = this.text(field);
    if (value === undefined) return undefined;
    const found = choices.find((choice) => choice === value);
    if (!found)
      throw badParameter(
        `Invalid ${this.name(field)}: must be one of ${choices.join(", ")}`,
        this.name(field),
        "parameter_invalid_enum",
      );
    return found;
  }

  /** US dollars only. */
  currency(field = "currency"): "usd" {
    const value = this.required(field).toLowerCase();
    if (value !== "usd")
      throw badParameter(
        `This stand-in only keeps US dollars, not ${value}.`,
        this.name(field),
        "parameter_invalid_enum",
      );
    return value;
  }

  nested(field: string): Params {
    const value = this.form[field];
    if (typeof value === "string" && value !== "")
      throw badParameter(`Invalid object: ${this.name(field)}`, this.name(field), "parameter_invalid_object");
    return new Params(typeof value === "object" ? value : {}, this.name(field));
  }

  items(field: string): Params[] {
    return Object.entries(this.nested(field).form).map(
      ([index, value]) =>
        new Params(typeof value === "object" ? value : { value }, `${this.name(field)}[${index}]`),
    );
  }

  strings(field: string): string[] {
    return Object.values(this.nested(field).form).map(String);
  }

  /** Keys to texts; an empty value takes a key away (https://docs.stripe.com/api/metadata). */
  metadata(before: Record<string, string> = {}): Record<string, string> {
    const value = this.form.metadata;
    if (value === "") return {};
    const merged = { ...before };
    for (const [key, text] of Object.entries(typeof value === "object" ? value : {})) {
      if (typeof text === "object")
        throw badParameter("Metadata values must be strings.", `metadata[${key}]`);
      if (key.length > 40 || text.length > 500)
        throw badParameter(
          "Metadata keys have at most 40 and values at most 500 characters.",
          `metadata[${key}]`,
        );
      if (text === "") delete merged[key];
      else merged[key] = text;
    }
    if (Object.keys(merged).length > 50) throw badParameter("Metadata can have at most 50 keys.", "metadata");
    return merged;
  }
}

export const AMOUNT_CENTS_MAX = 99_999_999;
export const CHARGE_CENTS_MIN = 50;

function checkAmount(value: number, param: string): number {
  if (value < 1)
    throw badParameter("This value must be greater than or equal to 1.", param, "parameter_invalid_integer");
  if (value > AMOUNT_CENTS_MAX)
    throw badParameter("Amount must be no more than $999,999.99", param, "amount_too_large");
  return value;
}
