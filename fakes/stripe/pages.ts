import { escapeHtml, page } from "../shared/page";
import { html, readAll, redirect, type Answer, type Call } from "../shared/transport";
import { BANKS } from "./cards";
import { completeOnboarding } from "./connect";
import type { Intent, Session } from "./objects";
import { failPayment, paySession, chargeCard } from "./payments";
import { PLATFORM, type World } from "./world";

const dollars = (cents: number): string =>
  `$${(cents / 100).toLocaleString("en-US", { minimumFractionDigits: 2, maximumFractionDigits: 2 })}`;
const digits = (value: string | null): string => (value ?? "").replace(/\D/g, "");

/** The pages that a person meets. Undefined where the path is none of them. */
export async function answerPage(call: Call, world: World): Promise<Answer | undefined> {
  const [, place = "", id = "", step = ""] = call.path.split("/");
  const isPost = call.method === "POST";
  const fields =
    isPost && ["checkout", "authenticate", "onboarding"].includes(place)
      ? new URLSearchParams((await readAll(call.body, 64_000)).toString("utf8"))
      : null;
  switch (place) {
    case "":
      return html(200, overview(world));
    case "checkout":
      return checkout(world, id, step === "pay" ? fields : null);
    case "authenticate":
      return authenticate(world, id, fields);
    case "onboarding":
      return onboarding(world, id, fields);
    case "accounts":
      return html(200, statement(world, id));
    case "receipts":
      return html(200, receipt(world, id));
  }
  return undefined;
}

const notFound = (what: string): Answer =>
  html(
    404,
    page(
      "Not found",
      `<main class="narrow"><h1>${escapeHtml(what)}</h1><p>The address is wrong, or the stand-in's data was deleted since.</p></main>`,
    ),
  );

const successUrl = ({ success_url, id }: Session): string =>
  (success_url ?? "").replaceAll("{CHECKOUT_SESSION_ID}", id);

function checkout(world: World, id: string, fields: URLSearchParams | null): Answer {
  const session = world.sessions.find(id);
  if (!session) return notFound("There is no such payment");
  if (session.status === "complete") return redirect(successUrl(session));
  if (session.status === "expired") {
    const back = session.cancel_url
      ? `<p><a class="button" href="${escapeHtml(session.cancel_url)}">Go back</a></p>`
      : "";
    return html(
      410,
      page(
        "Expired",
        `<main class="narrow"><h1>This payment page has expired</h1><p>Nothing was charged.</p>${back}</main>`,
      ),
    );
  }
  if (!fields) {
    const error = session._error;
    if (error !== null) {
      session._error = null; // shown once
      world.save(world.sessions, session);
    }
    return html(200, payPage(session, error === null ? null : { field: "card", message: error }, null));
  }
  const problem = checkFields(fields, world.clock.nowMs());
  if (problem) return html(422, payPage(session, problem, fields));
  const paid = paySession(world, session, digits(fields.get("card")));
  if (paid.result === "declined")
    return html(
      402,
      payPage(
        session,
        {
          field: paid.code === "incorrect_cvc" ? "cvc" : paid.code === "expired_card" ? "expiry" : "card",
          message: paid.message,
        },
        fields,
      ),
    );
  return redirect(paid.result === "authenticate" ? `/authenticate/${paid.intent.id}` : successUrl(session));
}

type Problem = { field: "card" | "expiry" | "cvc"; message: string };

function checkFields(fields: URLSearchParams, nowMs: number): Problem | null {
  const card = digits(fields.get("card"));
  if (card.length < 12) return { field: "card", message: "Your card number is incomplete." };
  const [, month = "", year = ""] =
    /^\s*(\d{1,2})\s*\/?\s*(\d{2}|\d{4})\s*$/.exec(fields.get("expiry") ?? "") ?? [];
  if (!(Number(month) >= 1 && Number(month) <= 12))
    return { field: "expiry", message: "Your card's expiration date is incomplete." };
  const fullYear = year.length === 2 ? 2000 + Number(year) : Number(year);
  if (Date.UTC(fullYear, Number(month)) <= nowMs)
    return { field: "expiry", message: "Your card's expiration date is in the past." };
  if (!/^\d{3,4}$/.test((fields.get("cvc") ?? "").trim()))
    return { field: "cvc", message: "Your card's security code is incomplete." };
  return null;
}

function payPage(session: Session, problem: Problem | null, fields: URLSearchParams | null): string {
  const total = dollars(session.amount_total);
  const given = (name: string): string => (fields ? ` value="${escapeHtml(fields.get(name) ?? "")}"` : "");
  const marks = (field: Problem["field"]): string =>
    problem?.field === field ? ` aria-invalid="true" aria-describedby="problem" autofocus` : "";
  const items = session._items
    .map(
      (item) =>
        `<div class="sum"><span>${escapeHtml(item.description ?? "")}${item.quantity > 1 ? ` × ${item.quantity}` : ""}</span><span>${dollars(item.amount_total)}</span></div>`,
    )
    .join("");
  const cancel = session.cancel_url
    ? `<a class="button quiet" href="${escapeHtml(session.cancel_url)}">Cancel</a>`
    : "";
  return page(
    `Pay ${total}`,
    `<main class="narrow"><h1>Pay ${total}</h1><section aria-label="What you pay for">${items}</section>
<form class="card" style="margin-top:1.25rem" method="post" action="/checkout/${session.id}/pay">
${problem ? `<p class="error" role="alert" id="problem">${escapeHtml(problem.message)}</p>` : ""}
<label for="card" style="margin-top:0">Card number</label><input id="card" name="card" inputmode="numeric" autocomplete="cc-number" required maxlength="23" placeholder="4242 4242 4242 4242"${given("card")}${marks("card")}>
<div class="pair"><div><label for="expiry">Expiry</label><input id="expiry" name="expiry" autocomplete="cc-exp" required maxlength="9" placeholder="12 / 34"${given("expiry")}${marks("expiry")}></div>
<div><label for="cvc">Security code</label><input id="cvc" name="cvc" inputmode="numeric" autocomplete="cc-csc" required maxlength="4" placeholder="123"${marks("cvc")}></div></div>
<div class="row"><button type="submit">Pay ${total}</button>${cancel}</div></form>
<details><summary>Test cards</summary><div class="scroll"><table class="stack"><caption class="muted">Any future expiry and any code</caption><thead><tr><th scope="col">Number</th><th scope="col">What happens</th></tr></thead><tbody>
<tr><td>4242 4242 4242 4242</td><td>succeeds</td></tr><tr><td>4000 0000 0000 0077</td><td>succeeds, and the money is available at once</td></tr><tr><td>4000 0027 6000 3184</td><td>the bank asks for confirmation</td></tr><tr><td>4000 0000 0000 0002</td><td>is declined</td></tr><tr><td>4000 0000 0000 9995</td><td>has insufficient funds</td></tr><tr><td>4000 0000 0000 0069</td><td>has expired</td></tr><tr><td>4000 0000 0000 0259</td><td>succeeds and is disputed</td></tr></tbody></table></div></details></main>`,
  );
}

function authenticate(world: World, id: string, fields: URLSearchParams | null): Answer {
  const intent = world.intents.find(id);
  if (!intent) return notFound("There is no such payment");
  const session = world.sessions.find(intent._session ?? "");
  if (intent.status !== "requires_action") return redirect(wayBack(world, intent, session));
  if (!fields) return html(200, authenticatePage(intent));
  if (fields.get("answer") === "confirm") {
    if (session) paySession(world, session, intent._card ?? "", true);
    else chargeCard(world, intent, true);
  } else {
    const message =
      "We are unable to authenticate your payment method. Please choose a different payment method and try again.";
    failPayment(world, intent, {
      type: "card_error",
      code: "payment_intent_authentication_failure",
      message,
    });
    if (session) {
      session._error = message;
      world.save(world.sessions, session);
    }
  }
  return redirect(wayBack(world, intent, session));
}

function wayBack(world: World, intent: Intent, session: Session | undefined): string {
  if (session) return session.status === "complete" ? successUrl(session) : `/checkout/${session.id}`;
  const url = new URL(intent._returnUrl ?? world.baseUrl);
  url.searchParams.set("payment_intent", intent.id);
  url.searchParams.set("payment_intent_client_secret", String(intent.rest.client_secret));
  url.searchParams.set("redirect_status", intent.status === "succeeded" ? "succeeded" : "failed");
  return url.href;
}

const authenticatePage = (intent: Intent): string =>
  page(
    "Confirm the payment",
    `<main class="narrow"><h1>Your bank asks</h1><form class="card" method="post" action="/authenticate/${intent.id}">
<p style="margin-top:0">Do you confirm a payment of <strong>${dollars(intent.amount)}</strong> with the card that ends in ${escapeHtml((intent._card ?? "").slice(-4))}?</p>
<div class="row"><button name="answer" value="confirm">Confirm</button><button class="quiet" name="answer" value="refuse">Refuse</button></div></form>
<p class="muted">This page stands in for the card holder's bank (3-D Secure).</p></main>`,
  );

const BANK_WORDS: Record<string, string> = {
  "000123456789": "payouts arrive",
  "000111111116": "payouts fail, no such account",
  "000111111113": "payouts fail, account closed",
};

function onboarding(world: World, token: string, fields: URLSearchParams | null): Answer {
  const link = world.links.find(token);
  const account = world.accounts.find(link?.account ?? "");
  if (!link || !account) return notFound("There is no such link");
  // A link serves once and for a few minutes; after that the product is asked for a new one.
  if (link.isUsed || link.expiresMs < world.clock.nowMs()) return redirect(link.refreshUrl);
  const bank = fields?.get("bank") ?? "";
  if (fields && bank in BANKS) {
    world.links.put(token, { ...link, isUsed: true });
    completeOnboarding(world, account, bank);
    return redirect(link.returnUrl);
  }
  const options = Object.entries(BANK_WORDS)
    .map(([number, words]) => `<option value="${number}">${number}: ${words}</option>`)
    .join("");
  return html(
    fields ? 422 : 200,
    page(
      "Payout account",
      `<main class="narrow"><h1>Where should the money go?</h1><form class="card" method="post" action="/onboarding/${escapeHtml(token)}">
<p style="margin-top:0">Account of <strong>${escapeHtml(account.email ?? account.id)}</strong></p>
${fields ? `<p class="error" role="alert">Choose one of the bank accounts.</p>` : ""}
<label for="bank">Bank account</label><select id="bank" name="bank">${options}</select>
<div class="row"><button type="submit">Finish onboarding</button><a class="button quiet" href="${escapeHtml(link.refreshUrl)}">Not now</a></div></form>
<p class="muted">The real service asks for name, address, date of birth and tax details here. The stand-in asks for nothing and keeps nothing of the kind.</p></main>`,
    ),
  );
}

function overview(world: World): string {
  const { available, pending } = world.balance(PLATFORM);
  const when = (seconds: number): string =>
    new Date(seconds * 1000).toISOString().slice(0, 16).replace("T", " ");
  const rows = [
    ...world.charges.all().filter(({ id }) => id.startsWith("ch_")),
    ...world.refunds.all(),
    ...world.transfers.all(),
    ...world.payouts.all(),
    ...world.disputes.all(),
  ]
    .sort((a, b) => b.created - a.created)
    .slice(0, 100)
    .map(
      (row) =>
        `<tr><td class="keep">${when(row.created)}</td><td class="keep">${row.object.replaceAll("_", " ")}</td><td class="num">${dollars(row.amount)}</td><td>${"status" in row ? row.status.replaceAll("_", " ") : "sent"}</td><td>${escapeHtml(row.id)}</td></tr>`,
    )
    .join("");
  const accounts = world.accounts
    .all()
    .map(
      (account) =>
        `<tr><td><a href="/accounts/${account.id}">${escapeHtml(account.email ?? account.id)}</a></td><td class="num">${dollars(world.balance(account.id).available)}</td><td>${account.payouts_enabled ? "ready" : "not onboarded"}</td></tr>`,
    )
    .join("");
  const table = (caption: string, head: string[], body: string): string =>
    body === ""
      ? `<p class="muted">${caption}: none yet.</p>`
      : `<div class="scroll"><table class="stack"><caption>${caption}</caption><thead><tr>${head.map((name) => `<th scope="col">${name}</th>`).join("")}</tr></thead><tbody>${body}</tbody></table></div>`;
  return page(
    "Payments",
    `<main><h1>Payments on this machine</h1><dl class="card"><dt>Available</dt><dd>${dollars(available)}</dd><dt>Pending</dt><dd>${dollars(pending)}</dd></dl>
<h2>Connected accounts</h2>${table("Accounts", ["Account", "Available", "State"], accounts)}<h2>Movements</h2>${table("The latest hundred, times in UTC", ["Time", "Kind", "Amount", "State", "Id"], rows)}</main>`,
  );
}

function statement(world: World, id: string): string {
  const account = world.accounts.find(id);
  if (!account) return page("Not found", `<main class="narrow"><h1>There is no such account</h1></main>`);
  const { available, pending } = world.balance(id);
  const payouts = world.payouts
    .all()
    .filter(({ _account }) => _account === id)
    .reverse()
    .map(
      (payout) =>
        `<tr><td>${escapeHtml(payout.id)}</td><td class="num">${dollars(payout.amount)}</td><td>${payout.status.replaceAll("_", " ")}${payout.failure_message ? `: ${escapeHtml(payout.failure_message)}` : ""}</td></tr>`,
    )
    .join("");
  return page(
    "Account",
    `<main><p><a href="/">All payments</a></p><h1>${escapeHtml(account.email ?? account.id)}</h1><dl class="card"><dt>Available</dt><dd>${dollars(available)}</dd><dt>Pending</dt><dd>${dollars(pending)}</dd><dt>Transfers</dt><dd>${account.capabilities.transfers ?? "not requested"}</dd></dl>
<h2>Payouts</h2>${payouts === "" ? `<p class="muted">None yet.</p>` : `<table class="stack"><thead><tr><th scope="col">Id</th><th scope="col">Amount</th><th scope="col">State</th></tr></thead><tbody>${payouts}</tbody></table>`}</main>`,
  );
}

function receipt(world: World, id: string): string {
  const charge = world.charges.find(id);
  if (!charge) return page("Not found", `<main class="narrow"><h1>There is no such receipt</h1></main>`);
  return page(
    "Receipt",
    `<main class="narrow"><h1>Receipt</h1><dl class="card"><dt>Amount</dt><dd>${dollars(charge.amount)}</dd><dt>Refunded</dt><dd>${dollars(charge.amount_refunded)}</dd><dt>Payment</dt><dd>${escapeHtml(charge.id)}</dd></dl></main>`,
  );
}
