import { createHmac } from "node:crypto";
import type { Table } from "../shared/tables";
import type { Endpoint, Event } from "./objects";
import type { World } from "./world";

export type Delivery = {
  id: string;
  event: string;
  endpoint: string;
  attempt: number;
  dueMs: number;
  lastStatus: number | null;
};
/** Hands a signed event over; resolves with the HTTP status, or with 0 when nobody answered. */
export type Deliver = (url: string, headers: Record<string, string>, body: string) => Promise<number>;

const TIMEOUT_MS = 10_000;
const AT_ONCE_MAX = 4;
/** Quick at first, so that a demo recovers; then slower, for three days. */
const RETRY_MS = [500, 1000, 2000, 4000, 8000, 15_000, 30_000, 60_000];
const RETRY_MS_LAST = 300_000;
const GIVE_UP_MS = 3 * 86_400_000;

/** The `Stripe-Signature` header (https://docs.stripe.com/webhooks#verify-manually): one v1 for each secret. */
export function signWebhook(body: string, secrets: readonly string[], atSeconds: number): string {
  const signatures = secrets.map(
    (secret) => `v1=${createHmac("sha256", secret).update(`${atSeconds}.${body}`).digest("hex")}`,
  );
  return [`t=${atSeconds}`, ...signatures].join(",");
}

/** Events on their way to the endpoints: kept over a restart, tried again, and disturbed on purpose. */
export class Webhooks {
  private readonly deliveries: Table<Delivery>;
  private count = 0;
  private running: Promise<void> | null = null;
  private isPaused = false;
  private drops = 0;
  private duplicates = 0;
  private isShuffled = false;
  private delayMs = 0;

  constructor(
    private readonly world: World,
    private readonly deliver: Deliver = post,
    private readonly random: () => number = Math.random,
  ) {
    this.deliveries = world.documents.table("delivery");
    this.count = this.deliveries.all().reduce((max, { id }) => Math.max(max, Number(id)), 0);
  }

  /** Queues an event for every endpoint that wants it. */
  enqueue = (event: Event): void => {
    for (const endpoint of this.world.endpoints.values()) {
      if (!wants(endpoint, event)) continue;
      if (this.drops > 0) {
        this.drops -= 1;
        continue;
      }
      const copies = this.duplicates > 0 ? 2 : 1;
      if (copies === 2) this.duplicates -= 1;
      for (let copy = 0; copy < copies; copy += 1) this.queue(event.id, endpoint.id);
    }
  };

  private queue(event: string, endpoint: string): void {
    const id = String((this.count += 1)).padStart(12, "0");
    const dueMs = this.world.clock.nowMs() + this.delayMs;
    this.deliveries.put(id, { id, event, endpoint, attempt: 0, dueMs, lastStatus: null });
  }

  /** Sends one event, or all of them, to every endpoint again. */
  resend(eventId?: string): number {
    const events = this.world.events.all().filter(({ id }) => eventId === undefined || id === eventId);
    for (const event of events)
      for (const endpoint of this.world.endpoints.values())
        if (wants(endpoint, event)) this.queue(event.id, endpoint.id);
    return events.length;
  }

  control(input: Record<string, unknown>): unknown {
    if (typeof input.paused === "boolean") this.isPaused = input.paused;
    if (typeof input.drop === "number") this.drops = input.drop;
    if (typeof input.duplicate === "number") this.duplicates = input.duplicate;
    if (typeof input.shuffle === "boolean") this.isShuffled = input.shuffle;
    if (typeof input.delayMs === "number") this.delayMs = input.delayMs;
    return {
      paused: this.isPaused,
      drop: this.drops,
      duplicate: this.duplicates,
      shuffle: this.isShuffled,
      delayMs: this.delayMs,
      pending: this.pending(),
    };
  }

  pending(): Delivery[] {
    return this.deliveries.all();
  }

  /** Delivers what is due, or everything with `all`, and waits for the answers. */
  async run(all = false): Promise<void> {
    if (this.isPaused && !all) return;
    while (this.running) await this.running;
    const nowMs = this.world.clock.nowMs();
    const due = this.deliveries.all().filter(({ dueMs }) => all || dueMs <= nowMs);
    if (due.length === 0) return;
    due.sort((a, b) => a.dueMs - b.dueMs || (a.id < b.id ? -1 : 1));
    if (this.isShuffled) shuffle(due, this.random);
    this.running = this.send(due).finally(() => (this.running = null));
    await this.running;
  }

  private async send(due: Delivery[]): Promise<void> {
    const queue = [...due];
    const worker = async (): Promise<void> => {
      for (let next = queue.shift(); next; next = queue.shift()) await this.attempt(next);
    };
    await Promise.all(Array.from({ length: Math.min(AT_ONCE_MAX, due.length) }, worker));
    this.world.documents.commit();
  }

  private async attempt(delivery: Delivery): Promise<void> {
    const { world } = this;
    const event = world.events.find(delivery.event);
    const endpoint = world.endpoints.find(delivery.endpoint);
    if (!event || !endpoint || endpoint.status === "disabled") return this.deliveries.delete(delivery.id);
    const body = JSON.stringify(world.render(event), null, 2);
    const nowMs = world.clock.nowMs();
    const secrets = endpoint._secrets
      .filter(({ untilMs }) => untilMs === null || untilMs > nowMs)
      .map(({ secret }) => secret);
    const headers = {
      "content-type": "application/json; charset=utf-8",
      "stripe-signature": signWebhook(body, secrets, world.clock.nowSeconds()),
      "user-agent": "Stripe/1.0 (local stand-in)",
    };
    const status = await this.deliver(endpoint.url, headers, body);
    if (!this.deliveries.find(delivery.id)) return; // reset meanwhile
    if (status >= 200 && status < 300) return this.deliveries.delete(delivery.id);
    const waitMs = RETRY_MS[delivery.attempt] ?? RETRY_MS_LAST;
    const next = {
      ...delivery,
      attempt: delivery.attempt + 1,
      dueMs: world.clock.nowMs() + waitMs,
      lastStatus: status,
    };
    if (world.clock.nowMs() - event.created * 1000 > GIVE_UP_MS) this.deliveries.delete(delivery.id);
    else this.deliveries.put(delivery.id, next);
  }
}

function wants(endpoint: Endpoint, event: Event): boolean {
  if (endpoint.status === "disabled") return false;
  if (endpoint._isConnect !== null && endpoint._isConnect !== (event.account !== undefined)) return false;
  return endpoint.enabled_events.some((type) => type === "*" || type === event.type);
}

function shuffle<T>(list: T[], random: () => number): void {
  for (let i = list.length - 1; i > 0; i -= 1) {
    const j = Math.floor(random() * (i + 1));
    const [a, b] = [list[i], list[j]];
    if (a !== undefined && b !== undefined) [list[i], list[j]] = [b, a];
  }
}

async function post(url: string, headers: Record<string, string>, body: string): Promise<number> {
  try {
    const answer = await fetch(url, {
      method: "POST",
      headers,
      body,
      redirect: "manual",
      signal: AbortSignal.timeout(TIMEOUT_MS),
    });
    await answer.arrayBuffer();
    return answer.status;
  } catch {
    return 0; // nobody listens, or the answer took too long: both are tried again
  }
}
