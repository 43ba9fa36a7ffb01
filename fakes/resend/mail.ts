export type MailEvent = {
  type: "email.sent" | "email.delivered" | "email.bounced" | "email.complained" | "email.failed";
  at: string;
};

export type Mail = {
  id: string;
  from: string;
  to: string[];
  cc: string[];
  bcc: string[];
  replyTo: string[];
  subject: string;
  html: string;
  text: string;
  headers: Record<string, string>;
  tags: { name: string; value: string }[];
  attachments: { filename: string; byteSize: number }[];
  idempotencyKey: string | null;
  createdAt: string;
  events: MailEvent[];
};

const RECIPIENTS_MAX = 50;

/** A request that is refused, in the words of Resend's error list (https://resend.com/docs/api-reference/errors). */
export class ResendError extends Error {
  constructor(
    readonly status: number,
    readonly code: string,
    message: string,
    readonly headers: Record<string, string> = {},
  ) {
    super(message);
  }
}

export const statusOf = ({ events }: Mail): string =>
  (events.at(-1)?.type ?? "email.sent").slice("email.".length);

const ADDRESS = /^(?:[^<>@\s][^<>]*<[^<>@\s]+@[^<>@\s]+\.[^<>@\s]+>|[^<>@\s]+@[^<>@\s]+\.[^<>@\s]+)$/;

/** The bare address of "Name <address>", in lower case. */
export const bareAddress = (text: string): string =>
  (/<([^<>]+)>/.exec(text)?.[1] ?? text).trim().toLowerCase();

/** Checks one letter as the API does. Throws ResendError. */
export function readMail(given: unknown, made: Pick<Mail, "id" | "createdAt" | "idempotencyKey">): Mail {
  if (typeof given !== "object" || given === null || Array.isArray(given))
    throw new ResendError(422, "validation_error", "The letter must be an object.");
  const fields: Record<string, unknown> = { ...given };
  const text = (name: string): string => (typeof fields[name] === "string" ? fields[name] : "");
  const required = (name: string): string => {
    const value = text(name);
    if (value === "") throw new ResendError(422, "missing_required_field", `Missing \`${name}\` field.`);
    return value;
  };
  const addresses = (name: string): string[] => {
    const value = fields[name];
    const list = (Array.isArray(value) ? value : value === undefined || value === null ? [] : [value]).map(
      String,
    );
    const wrong = list.find((address) => !ADDRESS.test(address.trim()));
    if (wrong !== undefined)
      throw new ResendError(
        422,
        "validation_error",
        `Invalid \`${name}\` field. The email address needs to follow the \`email@example.com\` or \`Name <email@example.com>\` format.`,
      );
    if (list.length > RECIPIENTS_MAX)
      throw new ResendError(
        422,
        "validation_error",
        `The \`${name}\` field has at most ${RECIPIENTS_MAX} addresses.`,
      );
    return list;
  };
  const from = required("from");
  if (!ADDRESS.test(from.trim()))
    throw new ResendError(
      422,
      "invalid_from_address",
      "Invalid `from` field. The email address needs to follow the `email@example.com` or `Name <email@example.com>` format.",
    );
  const to = addresses("to");
  if (to.length === 0) throw new ResendError(422, "missing_required_field", "Missing `to` field.");
  const subject = required("subject");
  if (text("html") === "" && text("text") === "")
    throw new ResendError(422, "missing_required_field", "Missing `html` or `text` field.");
  const headers =
    typeof fields.headers === "object" && fields.headers !== null
      ? Object.fromEntries(Object.entries(fields.headers).map(([name, value]) => [name, String(value)]))
      : {};
  return {
    ...made,
    from,
    to,
    cc: addresses("cc"),
    bcc: addresses("bcc"),
    replyTo: addresses("reply_to"),
    subject,
    html: text("html"),
    text: text("text"),
    headers,
    tags: readTags(fields.tags),
    attachments: readAttachments(fields.attachments),
    events: [],
  };
}

function readTags(given: unknown): Mail["tags"] {
  return (Array.isArray(given) ? given : []).map((tag: { name?: unknown; value?: unknown }) => {
    const pair = { name: String(tag.name ?? ""), value: String(tag.value ?? "") };
    const isPlain = (text: string): boolean => /^[A-Za-z0-9_-]{1,256}$/.test(text);
    if (!isPlain(pair.name) || !isPlain(pair.value))
      throw new ResendError(
        422,
        "validation_error",
        "Tags should only contain ASCII letters, numbers, underscores, or dashes.",
      );
    return pair;
  });
}

function readAttachments(given: unknown): Mail["attachments"] {
  return (Array.isArray(given) ? given : []).map((part: { filename?: unknown; content?: unknown }) => ({
    filename: String(part.filename ?? "attachment"),
    byteSize: typeof part.content === "string" ? Buffer.from(part.content, "base64").length : 0,
  }));
}
