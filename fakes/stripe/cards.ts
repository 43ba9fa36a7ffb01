/**
 * Test cards, payment methods, banks and evidence of Stripe's documentation (https://docs.stripe.com/testing and
 * https://docs.stripe.com/connect/testing), by what they do.
 */
export type CardOutcome =
  | { kind: "succeeds"; bypassesPending?: true; disputed?: true; refund?: "pending" | "fails" }
  | { kind: "declines"; code: string; declineCode: string; message: string }
  | { kind: "authenticates" };

const declines = (code: string, declineCode: string, message: string): CardOutcome => ({
  kind: "declines",
  code,
  declineCode,
  message,
});
const SUCCEEDS: CardOutcome = { kind: "succeeds" };

const CARDS: Record<string, CardOutcome> = {
  "4242424242424242": SUCCEEDS,
  "4000056655665556": SUCCEEDS,
  "5555555555554444": SUCCEEDS,
  "378282246310005": SUCCEEDS,
  "6011111111111117": SUCCEEDS,
  "4000000000000077": { kind: "succeeds", bypassesPending: true },
  "4000000000000259": { kind: "succeeds", disputed: true },
  "4000000000007726": { kind: "succeeds", refund: "pending" },
  "4000000000005126": { kind: "succeeds", refund: "fails" },
  "4000002760003184": { kind: "authenticates" },
  "4000002500003155": { kind: "authenticates" },
  "4000000000000002": declines("card_declined", "generic_decline", "Your card was declined."),
  "4000000000009995": declines("card_declined", "insufficient_funds", "Your card has insufficient funds."),
  "4000000000009987": declines("card_declined", "lost_card", "Your card was declined."),
  "4000000000009979": declines("card_declined", "stolen_card", "Your card was declined."),
  "4000000000000069": declines("expired_card", "expired_card", "Your card has expired."),
  "4000000000000127": declines("incorrect_cvc", "incorrect_cvc", "Your card's security code is incorrect."),
  "4000000000000119": declines(
    "processing_error",
    "processing_error",
    "An error occurred while processing your card. Try again in a little bit.",
  ),
};

const METHODS: Record<string, string> = {
  pm_card_visa: "4242424242424242",
  pm_card_mastercard: "5555555555554444",
  pm_card_amex: "378282246310005",
  pm_card_bypassPending: "4000000000000077",
  pm_card_createDispute: "4000000000000259",
  pm_card_pendingRefund: "4000000000007726",
  pm_card_refundFail: "4000000000005126",
  pm_card_authenticationRequired: "4000002760003184",
  pm_card_visa_chargeDeclined: "4000000000000002",
  pm_card_chargeDeclined: "4000000000000002",
  pm_card_visa_chargeDeclinedInsufficientFunds: "4000000000009995",
  pm_card_chargeDeclinedInsufficientFunds: "4000000000009995",
  pm_card_visa_chargeDeclinedLostCard: "4000000000009987",
  pm_card_chargeDeclinedExpiredCard: "4000000000000069",
  pm_card_chargeDeclinedIncorrectCvc: "4000000000000127",
  pm_card_chargeDeclinedProcessingError: "4000000000000119",
};

export const cardOfMethod = (method: string): string | undefined => METHODS[method];

/** The check digit of ISO/IEC 7812-1, annex B. */
export function hasCheckDigit(number: string): boolean {
  let sum = 0;
  [...number].reverse().forEach((digit, index) => {
    const doubled = Number(digit) * (index % 2 === 0 ? 1 : 2);
    sum += doubled > 9 ? doubled - 9 : doubled;
  });
  return sum % 10 === 0;
}

export function outcomeOf(number: string): CardOutcome {
  const known = CARDS[number];
  if (known) return known;
  if (!/^\d{12,19}$/.test(number) || !hasCheckDigit(number))
    return declines("incorrect_number", "incorrect_number", "Your card number is incorrect.");
  return declines(
    "card_declined",
    "test_mode_live_card",
    "Your card was declined. Your request was in test mode, but used a non test card.",
  );
}

export const brandOf = (number: string): string =>
  number.startsWith("4")
    ? "visa"
    : number.startsWith("5")
      ? "mastercard"
      : number.startsWith("3")
        ? "amex"
        : "discover";

/** US test bank accounts under routing number 110000000; null is an account that takes the money. */
export const BANKS: Record<string, { code: string; message: string } | null> = {
  "000123456789": null,
  "000111111116": {
    code: "no_account",
    message:
      "The bank account details on file are probably incorrect. No bank account could be located with those details.",
  },
  "000111111113": { code: "account_closed", message: "The bank account has been closed." },
  "000222222227": {
    code: "insufficient_funds",
    message: "Your account has insufficient funds to cover the payout.",
  },
  "000333333335": {
    code: "debit_not_authorized",
    message: "Debit transactions are not approved on the bank account.",
  },
  "000444444440": {
    code: "invalid_currency",
    message: "The bank was unable to process this payout because of its currency.",
  },
};
export const ROUTING_NUMBER = "110000000";
