/** The product's cautions, each of which defers to the law of the place and to qualified people. */
export const CAUTIONS = [
  {
    title: "Agreement is not proof",
    text: "Labels that feed a safety-critical system, such as driving, medicine or industrial guarding, need review by people qualified in that field. That several annotators agree does not make them right.",
  },
  {
    title: "Pay and tax are local",
    text: "Contracts, tax and minimum-wage rules differ from place to place. Merestone shows measured hourly pay and warns below a batch's floor; for what the law asks of you, rely on local law and licensed advice.",
  },
  {
    title: "Pictures can hold people",
    text: "Consent and privacy law are local. Sensitive batches are opt-in and flagged before the first image is shown, and location and camera metadata are stripped from every stored copy.",
  },
] as const;
