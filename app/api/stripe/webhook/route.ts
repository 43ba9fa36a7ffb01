import { nowMs } from "@/lib/clock";
import { problemResponse } from "@/lib/http/problem";
import { receiveStripeEvent } from "@/lib/market/money/stripeEvents";

const BODY_CHARACTERS_MAX = 1_000_000;

/** Where Stripe delivers events. The signature is the caller's proof; there is no session. */
export async function POST(request: Request): Promise<Response> {
  try {
    const body = await request.text();
    if (body.length > BODY_CHARACTERS_MAX) return new Response(null, { status: 413 });
    receiveStripeEvent({ body, signature: request.headers.get("stripe-signature"), nowMs: nowMs() });
    return Response.json({ received: true });
  } catch (error) {
    return problemResponse(error);
  }
}
