import { fork, type ChildProcess } from "node:child_process";
import type { Input, Operations, Value } from "./operations";
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

/** The product's process, as the driver sees it: it may be asked, it may die, and it can be started again. */
export class Product {
  private child: ChildProcess | undefined;
  private readonly asked = new Map<
    number,
    { resolve: (done: Outcome) => void; reject: (error: Error) => void }
  >();
  private readonly answering = new Set<Promise<void>>();
  private count = 0;
  private killAt: number | undefined;
  private gone: Promise<void> = Promise.resolve();
  deaths = 0;
  calls = 0;

  constructor(private readonly options: Options) {}

  get isAlive(): boolean {
    return this.child !== undefined;
  }

  async start(): Promise<void> {
    const { program, file, secretKey, webhookSecret } = this.options;
    const child = fork(program, [file, secretKey], {
      execArgv: ["--no-warnings", ...(process.env.SIM_PROF ? ["--cpu-prof", `--cpu-prof-dir=${process.env.SIM_PROF}`] : [])],
      env: { ...process.env, LOG_LEVEL: "silent", STRIPE_WEBHOOK_SECRET: webhookSecret, NODE_ENV: "test" },
      stdio: ["ignore", "inherit", "inherit", "ipc"],
    });
    this.child = child;
    const exited = new Promise<void>((resolve) => child.once("exit", () => resolve()));
    const ready = new Promise<void>((resolve, reject) => {
      child.once("error", reject);
      child.on("message", (message: FromProduct) => {
        if (message.what === "ready") resolve();
        else if (message.what === "call") this.relay(child, message.id, message.call);
        else this.settle(message.id, message.outcome, message.wrong);
      });
      // Messages that were written before a death are read before the channel closes.
      child.once("disconnect", () => {
        if (this.child === child) this.child = undefined;
        reject(new Died("the process died while it started"));
        const asked = [...this.asked.values()];
        this.asked.clear();
        for (const { reject: refuse } of asked) refuse(new Died("the process died"));
      });
    });
    this.gone = exited;
    await ready;
  }

  /** Lets the process die at the n-th commit or call from the next message on. */
  arm(points: number): void {
    this.killAt = points;
  }

  private moment(): Pick<ToProduct, "nowMs" | "entropy" | "killAt"> {
    const { killAt } = this;
    this.killAt = undefined;
    return {
      nowMs: this.options.nowMs(),
      entropy: this.options.dice.fork(),
      ...(killAt !== undefined && { killAt }),
    };
  }

  private tell(child: ChildProcess, message: ToProduct): void {
    if (child.connected) child.send(message, () => undefined);
  }

  private settle(id: number, outcome: Outcome, wrong: string | null): void {
    const waiting = this.asked.get(id);
    this.asked.delete(id);
    if (wrong !== null) waiting?.reject(new Violation(wrong));
    else waiting?.resolve(outcome);
  }

  private relay(child: ChildProcess, id: number, call: WireCall): void {
    this.calls += 1;
    const done = this.options.answer(call).then((answer) => {
      if (this.child === child) this.tell(child, { what: "answer", id, answer, ...this.moment() });
    });
    this.answering.add(done);
    void done.finally(() => this.answering.delete(done));
  }

  /** Asks for one operation. Throws Died when the process does not live to answer. */
  async ask<K extends keyof Operations>(operation: K, input: Input<K>): Promise<Reply<Value<K>>> {
    const { child } = this;
    if (!child) throw new Died("the process is dead");
    const id = (this.count += 1);
    const outcome = await new Promise<Outcome>((resolve, reject) => {
      this.asked.set(id, { resolve, reject });
      this.tell(child, { what: "do", id, operation, input, ...this.moment() });
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
    this.killAt = undefined;
    await this.start();
  }

  async stop(): Promise<void> {
    const { child } = this;
    this.child = undefined;
    child?.disconnect();
    await this.gone;
  }
}
