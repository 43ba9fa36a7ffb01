import { Webhook } from "standardwebhooks";
import Stripe from "stripe";
import { expect, it } from "vitest";
import { signStandardWebhook } from "@/fakes/resend/service";
import { signWebhook } from "@/fakes/stripe/webhooks";
import standard from "../../golden/services/standard-webhooks.json";
import vector from "../../golden/services/stripe-webhook-signature.json";

it("signs as the kept Stripe vector does, and the SDK accepts it", () => {
  const header = signWebhook(vector.payload, [vector.secret], vector.t);
  expect(header).toBe(vector.header);
  const { webhooks } = new Stripe("sk_test_x");
  expect(
    webhooks.constructEvent(vector.payload, header, vector.secret, 300, undefined, vector.t * 1000).id,
  ).toBe("evt_test_webhook");
  expect(() =>
    webhooks.constructEvent(vector.payload, header, "whsec_other", 300, undefined, vector.t * 1000),
  ).toThrow();
  expect(() =>
    webhooks.constructEvent(vector.payload, header, vector.secret, 300, undefined, (vector.t + 301) * 1000),
  ).toThrow("tolerance");
});

it("signs with each secret while one is being replaced", () => {
  const nowSeconds = Math.floor(Date.now() / 1000);
  const header = signWebhook(vector.payload, ["whsec_old", "whsec_new"], nowSeconds);
  const { webhooks } = new Stripe("sk_test_x");
  for (const secret of ["whsec_old", "whsec_new"])
    expect(webhooks.constructEvent(vector.payload, header, secret).id).toBe("evt_test_webhook");
});

it("signs as the reference vector of Standard Webhooks does, and its library accepts it", () => {
  const headers = signStandardWebhook(standard.secret, standard.id, standard.timestamp, standard.payload);
  expect(headers["webhook-signature"]).toBe(standard.signature);
  const nowSeconds = Math.floor(Date.now() / 1000);
  const fresh = signStandardWebhook(standard.secret, standard.id, nowSeconds, standard.payload);
  expect(new Webhook(standard.secret).verify(standard.payload, fresh)).toEqual(JSON.parse(standard.payload));
});
