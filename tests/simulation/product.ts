import { fork, type ChildProcess } from "node:child_process";
import type { Input, Operations, Value } from "./operations";
import { ProductCore } from "./productCore";
import type { FromProduct, Outcome, ToProduct, WireAnswer, WireCall } from "./protocol";
import type { Random } from "./random";

/** The process died before it answered: what was asked may have happened, or not. */
export class Died extends Error {
  override readonly name = "Died";
}

/** Something that no person, no hosted service and no death may cause. */
export class Violation extends Error {
  override readonly name = "Violation";
}

export type Reply<T> = { ok: true; value: T } | Extract<Outcome, { ok: false }>;

type Options = {
  /** A built productProcess, as JavaScript. */
  program: string;
  file: string;
  secretKey: string;
  webhookSecret: string;
  dice: Random;
  nowMs: () => number;
  answer: (call: WireCall) => Promise<WireAnswer | null>;
};

/** Where the product runs at the moment, and how it is spoken to. */
type Host = { tell: (message: ToProduct) => void; stop: () => Promise<void> };

/**
 * The product as the driver sees it. It runs inside this process, where a step costs least, until it is to die:
 * then it moves to a process of its own on the same file, dies there by SIGKILL, and comes back.
 */
export class Product {
  private host: Host | undefined;
  private readonly asked = new Map<
    number,
    { resolve: (done: Outcome) => void; reject: (error: Error) => void }
  >();
  private readonly answering = new Set<Promise<void>>();
  private count = 0;
  private gone: Promise<void> = Promise.resolve();
  deaths = 0;
  calls = 0;

  constructor(private readonly options: Options) {}

  get isAlive(): boolean {
    return this.host !== undefined;
  }

  /** Begins inside this process. */
  start(): void {
    const { file, secretKey } = this.options;
    const core: ProductCore = new ProductCore({
      file,
      secretKey,
      say: (message) => this.hear(host, message),
      point: () => undefined,
    });
    const host: Host = {
      tell: (message) => void core.take(message),
      stop: async () => core.close(),
    };
    this.host = host;
  }

  /** Moves to a process that dies at the n-th commit or call from now. Nothing may be under way. */
  async doom(points: number): Promise<void> {
    await this.host?.stop();
    this.host = undefined;
    const { program, file, secretKey, webhookSecret } = this.options;
    const child = fork(program, [file, secretKey, String(points)], {
      execArgv: ["--no-warnings"],
      env: { ...process.env, LOG_LEVEL: "silent", STRIPE_WEBHOOK_SECRET: webhookSecret },
      stdio: ["ignore", "inherit", "inherit", "ipc"],
    });
    this.gone = new Promise((resolve) => child.once("exit", () => resolve()));
    const host: Host = {
      tell: (message) => void (child.connected && child.send(message, () => undefined)),
      stop: async () => {
        child.disconnect();
        await this.gone;
      },
    };
    await this.listen(child, host);
    this.host = host;
  }

  private listen(child: ChildProcess, host: Host): Promise<void> {
    return new Promise((resolve, reject) => {
      child.once("error", reject);
      child.on("message", (message: FromProduct) => {
        if (message.what === "ready") resolve();
        else this.hear(host, message);
      });
      // What was said before a death is heard before the channel closes.
      child.once("disconnect", () => {
        reject(new Error("the product's process did not start"));
        if (this.host !== host) return;
        this.host = undefined;
        const asked = [...this.asked.values()];
        this.asked.clear();
        for (const { reject: refuse } of asked) refuse(new Died("the process died"));
      });
    });
  }

  private hear(host: Host, message: FromProduct): void {
    if (message.what === "call") return this.relay(host, message.id, message.call);
    if (message.what === "ready") return;
    const waiting = this.asked.get(message.id);
    this.asked.delete(message.id);
    if (message.wrong !== null) waiting?.reject(new Violation(message.wrong));
    else waiting?.resolve(message.outcome);
  }

  private relay(host: Host, id: number, call: WireCall): void {
    this.calls += 1;
    const done = this.options.answer(call).then((answer) => {
      if (this.host === host) host.tell({ what: "answer", id, answer, ...this.moment() });
    });
    this.answering.add(done);
    void done.finally(() => this.answering.delete(done));
  }

  private moment(): Pick<ToProduct, "nowMs" | "entropy"> {
    return { nowMs: this.options.nowMs(), entropy: this.options.dice.fork() };
  }

  /** Asks for one operation. Throws Died when the process does not live to answer. */
  async ask<K extends keyof Operations>(operation: K, input: Input<K>): Promise<Reply<Value<K>>> {
    const { host } = this;
    if (!host) throw new Died("the process is dead");
    const id = (this.count += 1);
    const outcome = await new Promise<Outcome>((resolve, reject) => {
      this.asked.set(id, { resolve, reject });
      host.tell({ what: "do", id, operation, input, ...this.moment() });
    });
    if (!outcome.ok && outcome.why === "bug") throw new Violation(`${operation}: ${outcome.message}`);
    return outcome as Reply<Value<K>>;
  }

  /** As `ask`, where only success is expected. */
  async get<K extends keyof Operations>(operation: K, input: Input<K>): Promise<Value<K>> {
    const reply = await this.ask(operation, input);
    if (!reply.ok) throw new Violation(`${operation} was refused: ${reply.message}`);
    return reply.value;
  }

  /** After a death: waits until all of it is over, and begins anew on the same file. */
  async restart(): Promise<void> {
    this.deaths += 1;
    await this.gone;
    while (this.answering.size > 0) await Promise.allSettled(this.answering);
    this.start();
  }

  async stop(): Promise<void> {
    const { host } = this;
    this.host = undefined;
    await host?.stop();
  }
}
